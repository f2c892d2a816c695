"""Refits: which window is judged next, with what, and what its outcome leads to."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import msgspec

from monitor.alarms.known import kept_out
from monitor.engine.alarming import known_of
from monitor.engine.natural import natural_id, natural_seed
from monitor.engine.posts import follow, post_measured
from monitor.engine.state import State
from monitor.engine.stimuli import Judged, Outcome
from monitor.engine.watching import Measured, Watched, WatchOrder, allowance_of, measured, watched
from monitor.plan import PlannedTail, StreamPlan
from monitor.plan.spans import DAY
from monitor.tail.compare import Comparison, compare_with_fit, compare_with_plan
from monitor.tail.judge import judge
from monitor.tail.judgement import Counting, Judgement, Options
from monitor.tail.sample import Sample
from monitor.watch.flags import flags_of
from monitor.watch.rules import stream_budget
from storage.facts import BaselineSet, Fact, RefitJob, RefitRetried, RefitStored, StoredPane
from storage.pane import add
from storage.window import sum_window

ATTEMPTS = 3
"""Times a window is tried before its refit is stored as failed."""


class RefitRequest(msgspec.Struct, frozen=True, kw_only=True):
    """Everything the worker needs to judge one window, beside the store."""

    job: RefitJob
    options: Options
    window_distinct: int
    first: int
    """First event of the stream: a young stream's rate counts only the time it exists."""
    baseline: BaselineSet | None
    order: WatchOrder


def next_request(state: State) -> RefitRequest | None:
    """The first committed job in window order, with all the worker needs; None when nothing waits."""
    if not state.jobs:
        return None
    job = state.jobs[0]
    stream = state.streams[job.stream]
    since = state.since.get(job.stream)
    if since is not None and job.start < since < job.end:
        # What came before an accepted change belongs to another baseline: the window begins with it.
        pane = state.plan.pane
        job = msgspec.structs.replace(job, start=min(job.end - pane, -(-since // pane) * pane))
    plan = state.plan.stream(job.stream, stream.unit)
    seed = natural_seed(state.plan.seed, job.stream, job.start, job.end, "refit")
    return RefitRequest(
        job=job,
        options=options_of(plan, seed),
        window_distinct=state.plan.window_distinct,
        first=stream.first,
        baseline=state.baselines.get(job.stream),
        order=watch_order(state, job.stream, job.end),
    )


def watch_order(state: State, stream: str, at: int) -> WatchOrder:
    """What the worker must know about the watch of a stream.

    Parameters: at, ns of event time: the budget is divided over the streams that had begun by then, so that it does
    not depend on how far ahead lines have been read.
    """
    begun = sum(other.first < at for other in state.streams.values())
    plan = state.plan.stream(stream, state.streams[stream].unit)
    posted = state.watches.get(stream)
    return WatchOrder(
        watch=posted.watch if posted else None,
        state=posted.state if posted else None,
        holding=posted.holding if posted else (),
        pane=state.plan.pane,
        zone=state.plan.timezone,
        baseline_tail=None if stream in state.baselines else plan.baseline_tail,
        budget_days=stream_budget(plan.false_alarm_every / DAY, begun),
        passage=plan.limit,
        allowance=allowance_of(plan),
    )


def options_of(plan: StreamPlan, seed: int) -> Options:
    """The options of a scheduled judgement; the rate of events is filled in by whoever has the window."""
    passages = plan.limit_at_most
    return Options(
        counting=plan.counting,
        min_tail=plan.min_tail,
        replicates=plan.replicates,
        rule_out=plan.rule_out,
        seed=seed,
        one_in=plan.one_in,
        limit=plan.limit,
        period_days=passages.period / DAY if passages else None,
        limit_at_most=passages.times if passages else None,
    )


class Verdict(msgspec.Struct, frozen=True, kw_only=True):
    """What a window says: of itself, against the baseline, to the watch, and as the first baseline of one."""

    judgement: Judgement
    comparison: Comparison | None
    watched: Watched | None
    measured: Measured | None


def compared_from(request: RefitRequest) -> int | None:
    """Start of the panes that may be compared with the baseline: those it was not judged on. None: none are."""
    if request.baseline is None:
        return None
    start = max(request.job.start, request.baseline.panes_to)
    return start if start < request.job.end else None


def judge_window(request: RefitRequest, panes: Sequence[StoredPane]) -> Verdict:
    """Judge a window, compare its part after the baseline, and move the watch on. Pure: the same input, the same bits.

    Parameters: panes, the sealed panes of request.job's window, by time.
    """
    job, order = request.job, request.order
    content = sum_window(job.start, job.end, panes, request.window_distinct).content
    days = (job.end - max(job.start, request.first)) / DAY
    options = msgspec.structs.replace(request.options, events_per_day=content.n / days if days > 0 else None)
    judgement = judge(Sample(content.sizes, content.counts, content.cells), options)
    return Verdict(
        judgement=judgement,
        comparison=_compared(request, panes),
        watched=watched(job.stream, panes, job.end, order),
        measured=measured(job.stream, panes, judgement, order, options.counting),
    )


def _compared(request: RefitRequest, panes: Sequence[StoredPane]) -> Comparison | None:
    start = compared_from(request)
    if start is None or request.baseline is None:
        return None
    later = add((pane.content for pane in panes if pane.start >= start), request.window_distinct)
    return _compare(Sample(later.sizes, later.counts, later.cells), request.baseline) if later.n else None


def _compare(later: Sample, baseline: BaselineSet) -> Comparison:
    counting: Counting = "whole" if baseline.counting == "whole" else "measured"
    if baseline.n_tail is None or baseline.n is None:
        return compare_with_plan(later, xmin=baseline.xmin, alpha=baseline.alpha, counting=counting)
    return compare_with_fit(
        later, xmin=baseline.xmin, alpha=baseline.alpha, n_tail=baseline.n_tail, n=baseline.n, counting=counting
    )


def planned_baseline(state: State, stream: str, now: int) -> BaselineSet | None:
    """The plan in the settings as the stream's baseline, unless it is that already."""
    seen = state.streams[stream]
    plan = state.plan.stream(stream, seen.unit)
    held = state.baselines.get(stream)
    if stream in state.since:
        return None  # a person accepted a change since: the plan is history
    if plan.planned is None or (held is not None and _is_this_plan(held, plan.planned)):
        return None
    start = seen.first // state.plan.pane * state.plan.pane
    planned = plan.planned
    return BaselineSet(
        id=natural_id("plan", stream, planned.alpha, planned.xmin, start if held is None else now),
        stream=stream, source="plan", refit=None, alpha=planned.alpha, xmin=planned.xmin, n_tail=None, n=None, p=None,
        plausible=None, counting=plan.counting, panes_to=start, effective_from=start if held is None else now,
        known_at=now,
    )  # fmt: skip


def _is_this_plan(held: BaselineSet, planned: PlannedTail) -> bool:
    return held.source != "plan" or (held.alpha == planned.alpha and held.xmin == planned.xmin)


def judged(state: State, stimulus: Judged) -> list[Fact]:
    """Store what the worker found, flag what differs, take the first good window as the baseline."""
    outcome = stimulus.outcome
    first = state.jobs.popleft()
    job = msgspec.structs.replace(outcome.job, attempts=first.attempts)
    assert (job.stream, job.end) == (first.stream, first.end), "outcomes come in the order of requests"
    if outcome.failure is not None and job.attempts + 1 < ATTEMPTS:
        again = msgspec.structs.replace(job, attempts=job.attempts + 1)
        state.jobs.appendleft(again)
        return [RefitRetried(stream=job.stream, end=job.end, attempts=again.attempts)]
    if outcome.judgement is None:
        return [_stored(state, job, outcome, stimulus.now, flags=())]
    judgement = msgspec.json.decode(outcome.judgement, type=Judgement, strict=False)
    refit = _stored(state, job, outcome, stimulus.now, flags=_flags(state, job, judgement, outcome))
    facts: list[Fact] = [refit]
    baseline = _first_baseline(state, refit, judgement)
    if baseline is not None:
        state.baselines[job.stream] = baseline
        facts.append(baseline)
    if outcome.watched is not None:
        facts += follow(state, job.stream, outcome.watched, stimulus.now)
    if baseline is not None and outcome.measured is not None:
        facts += post_measured(state, baseline, outcome.measured, stimulus.now)
    return facts


def _flags(state: State, job: RefitJob, judgement: Judgement, outcome: Outcome) -> tuple[Any, ...]:
    plan = state.plan.stream(job.stream, state.streams[job.stream].unit)
    comparison = outcome.comparison and msgspec.json.decode(outcome.comparison, type=Comparison, strict=False)
    return flags_of(
        gof_p=judgement.gof.p if judgement.gof else None,
        plausible=judgement.gof.plausible if judgement.gof else None,
        differs_p=comparison.p if comparison else None,
        direction=comparison.direction if comparison else None,
        differs_at=plan.differs_at,
    )


def _stored(state: State, job: RefitJob, outcome: Outcome, now: int, flags: tuple[Any, ...]) -> RefitStored:
    return RefitStored(
        id=natural_id(job.stream, job.start, job.end, outcome.window_digest),
        stream=job.stream, start=job.start, end=job.end, state="done" if outcome.judgement else "failed",
        panes=outcome.panes, window_digest=outcome.window_digest, settings=job.settings, seed=outcome.seed,
        judgement=outcome.judgement or "null", comparison=outcome.comparison,
        flags=msgspec.json.encode(flags).decode(), reason=outcome.failure, attempts=job.attempts + 1,
        seconds=outcome.seconds, versions=outcome.versions, known_at=now,
    )  # fmt: skip


def _first_baseline(state: State, refit: RefitStored, judgement: Judgement) -> BaselineSet | None:
    """The first window with enough tail, whatever its p: a date fixed beforehand, not the first lucky one."""
    if refit.stream in state.baselines or judgement.alpha is None:
        return None
    plan = state.plan.stream(refit.stream, state.streams[refit.stream].unit)
    assert judgement.n_tail is not None
    assert judgement.xmin is not None
    if judgement.n_tail < plan.baseline_tail or kept_out(known_of(state), refit.stream, refit.start, refit.end):
        return None
    since = state.since.get(refit.stream)
    if since is not None and refit.start < since:
        return None  # too short yet: the window must lie after the accepted change
    return BaselineSet(
        id=natural_id("first window", refit.id),
        stream=refit.stream, source="first window" if since is None else "accepted",
        refit=refit.id, alpha=judgement.alpha, xmin=judgement.xmin,
        n_tail=judgement.n_tail, n=judgement.n, p=judgement.gof.p if judgement.gof else None,
        plausible=judgement.gof.plausible if judgement.gof else None, counting=judgement.counting,
        panes_to=refit.end, effective_from=refit.end, known_at=refit.known_at,
    )  # fmt: skip
