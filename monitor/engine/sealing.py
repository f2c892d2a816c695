"""Watermarks, and the panes that they seal.

A pane seals when every chain that may carry its stream has its floor at or past the pane's end. A chain that
was read to its end and is silent for `idle` leaves that minimum; when all have left it, the watermark follows
the clock. Each such step is a stored fact, since it cannot be derived from lines.
"""

from __future__ import annotations

from monitor.engine.intake import AHEAD
from monitor.engine.state import Chain, FeedSet, State
from storage.facts import Advance, Fact, PanePart, PaneSealed, RefitJob
from storage.gathering import build_panes

END_OF_TIME = 2**62
"""The floor of chains that have ended for good; later than any stamp that can be parsed."""


def rest_idle_chains(state: State, now: int) -> None:
    """Chains at their end, silent for long enough, no longer hold the watermark back."""
    for chain in state.chains.values():
        quiet = chain.at_end and chain.quiet_since is not None and now - chain.quiet_since >= state.plan.idle
        if quiet and not chain.idle and not chain.ended:
            chain.idle = True
            chain.changed = True


def end_chains(state: State) -> None:
    """End of file is the end: what waits for a later line to confirm it waits in vain."""
    for chain in state.chains.values():
        chain.ended = True
        if chain.waiting is not None:
            chain.rejected[AHEAD] += 1
            chain.waiting = None
            chain.changed = True


def advance(state: State, now: int) -> list[Fact]:
    """Move the watermarks; returns the advances that came from the clock."""
    facts: list[Fact] = []
    for feeds in {state.carriers(name) for name in state.streams}:
        mark, by_clock = _watermark(state, feeds, now)
        if mark is None or mark <= state.marks.get(feeds, -END_OF_TIME):
            continue
        if by_clock and not _seals_something(state, feeds, mark):
            continue
        state.marks[feeds] = mark
        if by_clock:
            facts.append(Advance(feeds=feeds_text(feeds), to=mark, known_at=now))
    return facts


def feeds_text(feeds: FeedSet) -> str:
    """A set of feeds as one text, the same for the same set."""
    return "\n".join(sorted(feeds))


def feeds_of_text(text: str) -> FeedSet:
    """The set of feeds of a text."""
    return frozenset(text.split("\n"))


def _watermark(state: State, feeds: FeedSet, now: int) -> tuple[int | None, bool]:
    """The least floor over the chains that may carry lines, and whether the clock gave it."""
    chains = [chain for chain in state.chains.values() if chain.feed in feeds]
    if not chains:
        return None, False
    waking = [chain for chain in chains if not (chain.idle or chain.ended)]
    if not waking:
        ended = all(chain.ended for chain in chains)
        return (END_OF_TIME, False) if ended else (now - state.plan.idle, True)
    floors = [_floor(state, chain, now) for chain in waking]
    known = [floor for floor in floors if floor is not None]
    return (min(known), False) if len(known) == len(floors) else (None, False)


def _floor(state: State, chain: Chain, now: int) -> int | None:
    if chain.feed in state.by_arrival:
        return now  # a line that comes later gets a later time
    return chain.floor(state.plan.lateness)


def _seals_something(state: State, feeds: FeedSet, mark: int) -> bool:
    """The clock's advance is worth a fact only when it seals a pane."""
    pane = state.plan.pane
    return any(
        start + pane <= mark
        for stream in state.streams.values()
        if stream.open and state.carriers(stream.name) == feeds
        for start in stream.open
    )


def drain(state: State, now: int) -> list[Fact]:
    """Everything learnt since the last commit: parts of panes, panes to seal, streams, chains, samples."""
    facts = _parts(state)
    for stream in state.streams.values():
        if stream.changed:
            facts.append(stream.fact())
            stream.changed = False
        if stream.open:
            facts += _seal(state, stream.name, stream.open, now)
    for chain in state.chains.values():
        if chain.changed:
            facts.append(chain.fact())
            chain.changed = False
    facts += state.samples
    state.samples = []
    state.uncommitted = 0
    return facts


def _parts(state: State) -> list[Fact]:
    """The parts of all panes that have new events."""
    pane = state.plan.pane
    touched = [
        (stream.name, start, builder)
        for stream in state.streams.values()
        if stream.changed
        for start, builder in stream.builders.items()
        if builder.chunks
    ]
    contents = build_panes([builder for _, _, builder in touched], state.distinct)
    return [
        PanePart(stream=name, start=start, end=start + pane, content=content)
        for (name, start, _), content in zip(touched, contents, strict=True)
    ]


def _seal(state: State, name: str, open_panes: set[int], now: int) -> list[Fact]:
    mark = state.marks.get(state.carriers(name))
    if mark is None:
        return []
    pane, settings = state.plan.pane, state.plan.digest
    if min(open_panes) + pane > mark:
        return []
    window = state.plan.stream(name, state.streams[name].unit).window
    done = sorted(start for start in open_panes if start + pane <= mark)
    open_panes.difference_update(done)
    for start in done:
        state.streams[name].builders.pop(start, None)
    return [
        PaneSealed(stream=name, start=start, end=start + pane, window_start=start + pane - window, settings=settings,
                   known_at=now)
        for start in done
    ]  # fmt: skip


def job_of(sealed: PaneSealed) -> RefitJob:
    """The refit that a sealed pane asks for."""
    return RefitJob(
        stream=sealed.stream, start=sealed.window_start, end=sealed.end, settings=sealed.settings, attempts=0
    )
