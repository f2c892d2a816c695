"""Watches in force: begun with a baseline, followed slot by slot, restored from the store."""

from __future__ import annotations

import msgspec

from monitor.engine.alarming import heed
from monitor.engine.natural import natural_id
from monitor.engine.state import Posted, State
from monitor.engine.watching import Measured, Told, Watched, WatchOrder, planned_watch, watched
from monitor.tail.judgement import Counting
from monitor.watch import rules
from storage.facts import BaselineSet, Fact, RuleSpoke, WatchBegun, WatchStood


def text_of(value: object) -> str:
    """A record as JSON."""
    return msgspec.json.encode(value).decode()


def post_planned(state: State, baseline: BaselineSet, order: WatchOrder, now: int) -> list[Fact]:
    """Begin the watch against a plan, from the pane of the stream's first event on."""
    counting: Counting = "whole" if baseline.counting == "whole" else "measured"
    watch = planned_watch(baseline.stream, baseline.alpha, baseline.xmin, order, counting)
    return _post(state, baseline, watch, None, now)


def post_measured(state: State, baseline: BaselineSet, found: Measured, now: int) -> list[Fact]:
    """Begin the watch against a measured baseline, with the budget that its own past demands."""
    ground = found.ground
    watch = rules.begin(found.baseline, ground.budget_days or ground.promised_days)
    return _post(state, baseline, watch, text_of(ground), now)


def _post(state: State, baseline: BaselineSet, watch: rules.Watch, ground: str | None, now: int) -> list[Fact]:
    started = rules.start(watch, baseline.effective_from)
    posted = Posted(id=natural_id("watch", baseline.id, watch.budget_days), watch=watch, state=started)
    state.watches[baseline.stream] = posted
    return [
        WatchBegun(
            id=posted.id, stream=baseline.stream, baseline=baseline.id, effective_from=baseline.effective_from,
            watch=text_of(watch), ground=ground, known_at=now,
        ),
        WatchStood(
            stream=baseline.stream, watch=posted.id, at=started.at_ns, state=text_of(started), readings="[]"
        ),
    ]  # fmt: skip


def follow(state: State, stream: str, found: Watched, now: int) -> list[Fact]:
    """Take over where the watch stands after new slots, and what spoke."""
    posted = state.watches.get(stream)
    if posted is None or found.state.at_ns <= posted.state.at_ns:
        return []  # the watch was begun anew while the worker was at it
    state.watches[stream] = msgspec.structs.replace(posted, state=found.state)
    stood = WatchStood(
        stream=stream,
        watch=posted.id,
        at=found.state.at_ns,
        state=text_of(found.state),
        readings=text_of(found.readings),
    )
    return [stood, *(_spoke(posted, told, now) for told in found.told), *heed(state, stream, found, now)]


def _spoke(posted: Posted, told: Told, now: int) -> RuleSpoke:
    spoken = told.spoken
    return RuleSpoke(
        id=natural_id("spoken", posted.id, spoken.rule, spoken.at_ns), stream=spoken.stream, rule=spoken.rule,
        at=spoken.at_ns, watch=posted.id, spoken=text_of(spoken), change=text_of(told.change) if told.change else None,
        known_at=now,
    )  # fmt: skip


def silent_streams(state: State, orders: dict[str, WatchOrder], marks: dict[str, int], now: int) -> list[Fact]:
    """Move the watch of streams on for which nothing is left to judge: panes without events are slots too.

    Parameters: orders, of streams without a refit waiting; marks, stream -> up to where nothing can come any more.
    """
    facts: list[Fact] = []
    for stream, order in orders.items():
        if order.state is None:
            continue
        panes = (marks[stream] - order.state.at_ns) // order.pane
        nearest = min(state.streams[stream].open, default=None)
        if nearest is not None:
            panes = min(panes, (nearest - order.state.at_ns) // order.pane)
        found = watched(stream, (), order.state.at_ns + max(0, panes) * order.pane, order)
        if found is not None:
            facts += follow(state, stream, found, now)
    return facts
