"""The watch of one stream: nine rules, one clock, one budget.

`begin` turns a baseline and a budget into a `Watch` (fixed, stored once); `start` gives the first state; `step` folds
one sealed slot into it and says what every rule reads and which of them speak. All of it is pure, and states survive
a round trip through JSON bit for bit, so that any reading can be derived again from the slots.
"""

from __future__ import annotations

from math import exp, log, log1p
from typing import Literal

import msgspec

from monitor.watch import body, exponent, fit, groups, level, no_events, rejects, rival, single_event, tail_share
from monitor.watch.baseline import Baseline
from monitor.watch.mixture import Increment, Logs, grown, log_mean
from monitor.watch.scores import Past
from monitor.watch.slots import Ordered, SlotFacts, ordered

RuleName = Literal["exponent", "tail share", "fit", "level", "rival", "body", "no events", "rejects", "single event"]
Direction = Literal["heavier", "lighter"]

WEIGHTS: dict[RuleName, float] = {
    "exponent": 0.30,
    "tail share": 0.25,
    "fit": 0.10,
    "level": 0.10,
    "no events": 0.08,
    "body": 0.05,
    "rejects": 0.05,
    "single event": 0.05,
    "rival": 0.02,
}
"""How the budget is divided over the rules. Weights of rules that cannot be watched go to the others in proportion."""

RULES: tuple[RuleName, ...] = tuple(WEIGHTS)


class Ruled(msgspec.Struct, frozen=True):
    """One rule in force: its part of the budget, and ln of the evidence at which it speaks (N / weight)."""

    rule: RuleName
    weight: float
    ln_threshold: float


class Unwatched(msgspec.Struct, frozen=True):
    """A rule that is not in force, and why."""

    rule: RuleName
    why: str


class Watch(msgspec.Struct, frozen=True, kw_only=True):
    """Everything that is fixed while one baseline holds.

    budget_days  mean days between false alarms allowed to this stream, all its rules together, at the least
    """

    baseline: Baseline
    budget_days: float
    rules: tuple[Ruled, ...]
    unwatched: tuple[Unwatched, ...]
    groups: groups.GroupLaw
    body: body.BodyPlan
    single: single_event.SinglePlan


class Detector(msgspec.Struct, frozen=True):
    """Evidence of one rule: ln R for each member of its mixture (empty: R = 0), gathered since this moment."""

    ln_r: Logs
    since_ns: int


class WatchState(msgspec.Struct, frozen=True, kw_only=True):
    """Where the watch of a stream stands after a slot. Detectors are in the order of Watch.rules."""

    at_ns: int
    days: float
    events: int
    exceedances: int
    detectors: tuple[Detector, ...]
    log_sizes: Past
    share: tail_share.ShareState
    groups: groups.GroupState
    silence: no_events.SilenceState
    body: body.BodyState
    single: single_event.SingleState


class Reading(msgspec.Struct, frozen=True, kw_only=True):
    """What one rule reads in one slot.

    ln_p, ln_q    the slot's increment, clock included (mixture.compose); empty for body and single event
    ln_statistic  ln M after it, None while M = 0
    way           share of the way to speaking, 0..1: a display scale, ln(1 + 100 M w/N) / ln 101
    direction     which way the evidence points, where the rule has one
    """

    rule: RuleName
    stream: str
    at_ns: int
    ln_p: Logs
    ln_q: Logs
    ln_statistic: float | None
    ln_threshold: float
    way: float
    direction: Direction | None


class Spoken(msgspec.Struct, frozen=True, kw_only=True):
    """A rule speaks, at the end of a slot.

    since_ns   from when on its evidence was gathered; no change before it is claimed
    cause      what stands behind it where there are several possibilities
    log_sizes, gaps  what was known at the end of the slot: prior n and sums for monitor.watch.changepoint
    events, exceedances  seen by this watch up to here
    largest    the slot's largest size, for single events
    """

    rule: RuleName
    stream: str
    at_ns: int
    since_ns: int
    direction: Direction | None
    cause: str | None
    ln_statistic: float | None
    ln_threshold: float
    log_sizes: Past
    gaps: Past
    events: int
    exceedances: int
    largest: float | None


class Step(msgspec.Struct, frozen=True):
    """The outcome of one slot: the state after it, a reading for each rule, and the rules that speak."""

    state: WatchState
    readings: tuple[Reading, ...]
    spoken: tuple[Spoken, ...]


def stream_budget(budget_days: float, streams: int) -> float:
    """Mean days between false alarms of each stream, so that all streams of a receiver keep the receiver's budget.

    Expected numbers of false alarms add up under any dependence, so k streams get k times the receiver's days each.
    """
    return budget_days * max(1, streams)


def begin(baseline: Baseline, budget_days: float) -> Watch:
    """The watch against a baseline. budget_days: of this stream (stream_budget), raised where its past demands it."""
    reasons = _reasons(baseline)
    total = sum(weight for rule, weight in WEIGHTS.items() if rule not in reasons)
    rules = tuple(
        Ruled(rule, weight / total, log(budget_days * total / weight))
        for rule, weight in WEIGHTS.items()
        if rule not in reasons
    )
    days_between = {one.rule: budget_days / one.weight for one in rules}
    allowance = baseline.allowance
    return Watch(
        baseline=baseline,
        budget_days=budget_days,
        rules=rules,
        unwatched=tuple(Unwatched(rule, why) for rule, why in reasons.items()),
        groups=groups.law_for(baseline.stream, baseline.yardstick, baseline.alpha or 2.0, baseline.exceedances_a_day),
        body=body.plan_for(baseline.events_a_day, days_between.get("body", budget_days)),
        single=single_event.plan_for(
            days_between=days_between["single event"],
            exceedances_a_day=baseline.exceedances_a_day,
            tells_passages=baseline.yardstick.passage is not None
            and (allowance is None or (allowance.a_day is not None and allowance.a_day <= 1.0)),
            by_record=baseline.alpha is None,
        ),
    )


def _reasons(baseline: Baseline) -> dict[RuleName, str]:
    """The rules that cannot be watched, with the reason in words."""
    out: dict[RuleName, str] = {}
    if baseline.alpha is None:
        out.update(dict.fromkeys(("exponent", "fit", "rival"), "no power law"))
    if baseline.allowance is None or baseline.yardstick.passage is None:
        out["level"] = "no size is agreed on"
    if not any(baseline.week):
        out["no events"] = "the usual hours are not known yet"
    if baseline.rejects is None:
        out["rejects"] = "lines were not counted"
    if not baseline.events:
        out["body"] = "the usual number of events is not known yet"
    return out


def start(watch: Watch, at_ns: int) -> WatchState:
    """The state before the first slot, which starts at `at_ns`. The same call restarts a watch after `accept`."""
    base = watch.baseline
    pace = float(base.events)
    return WatchState(
        at_ns=at_ns,
        days=0.0,
        events=0,
        exceedances=0,
        detectors=tuple(Detector((), at_ns) for _ in watch.rules),
        log_sizes=base.log_sizes,
        share=tail_share.ShareState(base.gaps, base.open_gap, base.exchanged),
        groups=groups.GroupState(finished=len(base.cvs), cvs=base.cvs, longests=base.longests),
        silence=no_events.SilenceState(Past(pace, pace)),
        body=body.BodyState(),
        single=single_event.SingleState(seen=base.exceedances, largest=base.largest),
    )


def step(watch: Watch, state: WatchState, slot: SlotFacts, holding: frozenset[RuleName] = frozenset()) -> Step:
    """Fold one sealed slot.

    Parameters: slot, the next one in time (slots without events too: silence is evidence); holding, rules whose
    alarm stands: they go on being compared with what was known before and learn nothing, so that a change is not
    quietly taken for the new normal. (The bound is proved for first alarms; while an alarm stands further
    crossings are no new alarms.)
    """
    order = ordered(slot, watch.baseline.yardstick)
    found = _evidence(watch, state, slot, order, holding)
    after = msgspec.structs.replace(
        found.state,
        at_ns=slot.end_ns,
        days=state.days + slot.days,
        events=state.events + slot.events,
        exceedances=state.exceedances + int(order.y.size),
    )
    detectors, readings, spoken = [], [], []
    for ruled, detector in zip(watch.rules, state.detectors, strict=True):
        said = found.increments.get(ruled.rule)
        ln_r = grown(detector.ln_r, said) if said is not None else ()
        direction = _direction(ruled.rule, ln_r, state.share.exchanged)
        reading = _reading(ruled, slot, said, ln_r, direction)
        readings.append(reading)
        passed = reading.ln_statistic is not None and reading.ln_statistic >= ruled.ln_threshold
        if passed or ruled.rule in found.causes:
            cause = found.causes.get(ruled.rule) or _cause(ruled.rule, ln_r)
            spoken.append(_spoken(ruled, reading, detector, cause, after, slot))
            detector = Detector((), slot.end_ns)
        else:
            detector = Detector(ln_r, detector.since_ns)
        detectors.append(detector)
    return Step(msgspec.structs.replace(after, detectors=tuple(detectors)), tuple(readings), tuple(spoken))


class _Evidence(msgspec.Struct, frozen=True):
    """Increments by rule; causes of the rules that speak without one; the state with all parts moved on."""

    increments: dict[RuleName, Increment]
    causes: dict[RuleName, str | None]
    state: WatchState


def _evidence(
    watch: Watch, state: WatchState, slot: SlotFacts, order: Ordered, holding: frozenset[RuleName]
) -> _Evidence:
    base, clock = watch.baseline, slot.days
    sizes = exponent.step(state.log_sizes, order, clock, "exponent" in holding)
    share = tail_share.step(state.share, order, clock, "tail share" in holding)
    shapes = groups.step(state.groups, order.y, watch.groups, bool({"fit", "rival"} & holding))
    silence = no_events.step(
        state.silence,
        stream=slot.stream,
        start_ns=slot.start_ns,
        events=slot.events,
        expected=base.week[slot.hour] * 24.0 * clock if base.week and slot.hour >= 0 else 0.0,
        clock=clock,
        hold="no events" in holding,
    )
    increments: dict[RuleName, Increment] = {
        "exponent": sizes.increment,
        "tail share": share.increment,
        "fit": fit.increment(shapes.ranked, clock),
        "rival": rival.increment(shapes.ranked, clock),
        "no events": silence.increment,
    }
    if base.allowance is not None:
        increments["level"] = level.increment(base.allowance, slot.events, slot.passages, clock)
    if base.rejects is not None:
        increments["rejects"] = rejects.increment(base.rejects, slot.lines, slot.rejected, clock)
    bulk = body.step(state.body, slot, watch.body) if base.events else body.BodyStep(False, state.body)
    single = single_event.step(state.single, slot, order, state.log_sizes, watch.single)
    causes: dict[RuleName, str | None] = {}
    if bulk.speaks:
        causes["body"] = None
    if single.cause is not None:
        causes["single event"] = single.cause
    moved = msgspec.structs.replace(
        state,
        log_sizes=sizes.past,
        share=share.state,
        groups=shapes.state,
        silence=silence.state,
        body=bulk.state,
        single=single.state,
    )
    return _Evidence(increments, causes, moved)


def _direction(rule: RuleName, ln_r: Logs, exchanged: bool) -> Direction | None:
    """Which way the member with the most evidence points; a longer gap is a lighter tail."""
    if rule == "level":
        return "heavier"
    if rule not in ("exponent", "tail share") or not ln_r:
        return None
    grew = ln_r.index(max(ln_r)) >= len(ln_r) // 2
    heavier = grew if rule == "exponent" else grew == exchanged
    return "heavier" if heavier else "lighter"


def _cause(rule: RuleName, ln_r: Logs) -> str | None:
    return rival.cause(ln_r.index(max(ln_r))) if rule == "rival" else None


def _reading(ruled: Ruled, slot: SlotFacts, said: Increment | None, ln_r: Logs, direction: Direction | None) -> Reading:
    statistic = log_mean(ln_r) if ln_r else None
    way = 0.0
    if statistic is not None:
        way = min(1.0, log1p(100.0 * exp(min(0.0, statistic - ruled.ln_threshold))) / log(101.0))
    return Reading(
        rule=ruled.rule,
        stream=slot.stream,
        at_ns=slot.end_ns,
        ln_p=said.ln_p if said is not None else (),
        ln_q=said.ln_q if said is not None else (),
        ln_statistic=statistic,
        ln_threshold=ruled.ln_threshold,
        way=way,
        direction=direction,
    )


def _spoken(
    ruled: Ruled, reading: Reading, detector: Detector, cause: str | None, after: WatchState, slot: SlotFacts
) -> Spoken:
    return Spoken(
        rule=ruled.rule,
        stream=slot.stream,
        at_ns=slot.end_ns,
        since_ns=detector.since_ns,
        direction=reading.direction,
        cause=cause,
        ln_statistic=reading.ln_statistic,
        ln_threshold=ruled.ln_threshold,
        log_sizes=after.log_sizes,
        gaps=after.share.past,
        events=after.events,
        exceedances=after.exceedances,
        largest=slot.largest,
    )
