"""The engine's state from the facts of a store: a fold over what was committed, no checkpoint beside it."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterable, Mapping

import msgspec

from monitor.alarms.alarm import Alarm
from monitor.alarms.known import KnownChange
from monitor.engine.sealing import advance, feeds_of_text
from monitor.engine.state import Chain, Posted, State, Stream, WaitingEvent
from monitor.plan import Plan
from monitor.watch.rules import Watch, WatchState
from storage.facts import (
    AlarmStood,
    BaselineSet,
    ChainState,
    ChangeAccepted,
    KnownAdded,
    RefitJob,
    StreamState,
    WatchBegun,
    WatchStood,
)


class Remembered(msgspec.Struct, frozen=True, kw_only=True):
    """What a store knows, as the engine needs it.

    open_panes    (stream, start) of panes not sealed; sealed_edges: stream -> end of its last sealed pane
    watermarks    set of feeds as text -> the furthest watermark that the clock gave
    baselines     in the order they came into force
    """

    chains: Iterable[ChainState]
    streams: Iterable[StreamState]
    open_panes: Iterable[tuple[str, int]]
    sealed_edges: Mapping[str, int]
    watermarks: Mapping[str, int]
    jobs: Iterable[RefitJob]
    baselines: Iterable[BaselineSet]
    watches: Iterable[WatchBegun] = ()
    watch_states: Iterable[WatchStood] = ()
    open_alarms: Iterable[AlarmStood] = ()
    known_changes: Iterable[KnownAdded] = ()
    accepted: Iterable[ChangeAccepted] = ()


def restore(plan: Plan, distinct: int, remembered: Remembered, now: int) -> State:
    """The state to go on from. Chains of feeds that the plan no longer has are left as they are in the store."""
    state = State.fresh(plan, distinct)
    feeds = {feed.name for feed in plan.feeds}
    for fact in remembered.chains:
        if fact.feed in feeds:
            state.chains[fact.feed, fact.chain] = _chain(fact)
    for known in remembered.streams:
        state.streams[known.stream] = Stream(
            known.stream, known.feed, known.unit, known.first, known.newest, known.events, known.late, changed=False
        )
    for name, start in remembered.open_panes:
        state.streams[name].open.add(start)
    for name, edge in remembered.sealed_edges.items():
        carriers = state.carriers(name)
        state.marks[carriers] = max(edge, state.marks.get(carriers, edge))
    for text, mark in remembered.watermarks.items():
        carriers = feeds_of_text(text)
        state.marks[carriers] = max(mark, state.marks.get(carriers, mark))
    for baseline in remembered.baselines:
        state.baselines[baseline.stream] = baseline
    for known_change in remembered.known_changes:
        state.declared.append(
            KnownChange(
                start=known_change.start, end=known_change.end, streams=known_change.streams,
                reason=known_change.reason, effect=known_change.effect,  # type: ignore[arg-type]
            )
        )  # fmt: skip
    for accepted in remembered.accepted:
        state.since[accepted.stream] = accepted.since
        held = state.baselines.get(accepted.stream)
        if held is not None and held.known_at < accepted.known_at:
            del state.baselines[accepted.stream]
    for stored in remembered.open_alarms:
        state.alarms[stored.stream, stored.rule] = msgspec.json.decode(stored.alarm, type=Alarm)
    begun = {watch.id: watch for watch in remembered.watches}
    for stood in remembered.watch_states:
        if stood.stream not in state.baselines:
            continue  # a change was accepted, and the new baseline is still to come
        state.watches[stood.stream] = Posted(
            id=stood.watch,
            watch=msgspec.json.decode(begun[stood.watch].watch, type=Watch),
            state=msgspec.json.decode(stood.state, type=WatchState),
            holding=tuple(
                alarm.rule for alarm in state.alarms.values() if alarm.stream == stood.stream and alarm.standing
            ),
        )
    state.jobs.extend(sorted(remembered.jobs, key=lambda job: (job.end, job.stream)))
    # Before new chains are found: their edge must lie where the watermark stood.
    advance(state, now)
    return state


def _chain(fact: ChainState) -> Chain:
    return Chain(
        fact.feed,
        fact.chain,
        bookmark=fact.bookmark,
        running_max=fact.running_max,
        edge=fact.edge,
        idle=fact.idle,
        waiting=msgspec.json.decode(fact.waiting, type=WaitingEvent) if fact.waiting else None,
        lines=fact.lines,
        events=fact.events,
        late=fact.late,
        skipped=Counter(fact.skipped),
        rejected=Counter(fact.rejected),
        changed=False,
    )
