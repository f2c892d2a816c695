"""Lines into panes: accounts, effective times, and the events of each stream to the pane of their time."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from monitor.engine.clockwork import Rules, effective_times
from monitor.engine.grouping import Groups, groups_of
from monitor.engine.state import Chain, State, Stream, WaitingEvent
from monitor.engine.stimuli import Arrived, ChainSeen, Lines
from storage.facts import RejectedSample
from storage.gathering import PaneBuilder

TOO_MANY = "one stream too many"
"""Reason under which a line is counted that would open a stream beyond the settings' max_streams."""
AHEAD = "stamp far ahead"
"""Reason under which a line is counted whose stamp no later line bore out."""


def chain_seen(state: State, seen: ChainSeen) -> None:
    """A chain exists. One found after panes were sealed gets their end as its edge."""
    chain = _chain(state, seen.feed, seen.chain, seen.now)
    chain.at_end = seen.at_end
    chain.dated = seen.quiet_since is not None
    if seen.quiet_since is not None:
        chain.quiet_since = seen.quiet_since
    elif chain.quiet_since is None:
        chain.quiet_since = seen.now


def _chain(state: State, feed: str, name: str, now: int) -> Chain:
    chain = state.chains.get((feed, name))
    if chain is None:
        chain = state.chains[feed, name] = Chain(feed, name, edge=_sealed_edge(state, feed))
    return chain


def _sealed_edge(state: State, feed: str) -> int | None:
    """The furthest watermark that a line of this feed could fall behind."""
    marks = [mark for feeds, mark in state.marks.items() if feed in feeds]
    return max(marks) if marks else None


def arrived(state: State, stimulus: Arrived) -> None:
    """Take the lines of one block in."""
    chain = _chain(state, stimulus.feed, stimulus.chain, stimulus.now)
    lines = stimulus.lines
    if lines.count:
        if not chain.dated:
            chain.quiet_since = stimulus.now
        if chain.idle:
            chain.idle = False
            edges = [edge for edge in (chain.edge, _sealed_edge(state, chain.feed)) if edge is not None]
            chain.edge = max(edges) if edges else None
    chain.changed = True
    chain.bookmark = stimulus.bookmark
    chain.lines += lines.count
    chain.skipped.update(lines.skipped)
    chain.rejected.update(lines.rejected)
    _keep_samples(state, stimulus)
    if not lines.sizes.size:
        return
    if lines.stamps is None:
        chain.running_max = max(stimulus.now, chain.running_max or stimulus.now)
        times = np.full(lines.sizes.size, max(chain.running_max, chain.edge or chain.running_max), np.int64)
        _count(state, chain, lines, times, np.zeros(times.size, bool))
    else:
        _count_timed(state, chain, lines, lines.stamps)


def _keep_samples(state: State, stimulus: Arrived) -> None:
    state.samples.extend(
        RejectedSample(
            feed=stimulus.feed, chain=stimulus.chain, reason=line.reason, position=line.position, text=line.text,
            known_at=stimulus.now,
        )
        for line in stimulus.lines.samples
    )  # fmt: skip


def _count_timed(state: State, chain: Chain, lines: Lines, stamps: NDArray[np.int64]) -> None:
    rules = Rules(lateness=state.plan.lateness, ahead=state.plan.ahead)
    if chain.waiting is not None:
        lines, stamps = _with_waiting(chain.waiting, lines, stamps)
    timed = effective_times(stamps, chain.running_max, chain.edge, rules, waits=chain.waiting is not None)
    if timed.refused:
        chain.rejected[AHEAD] += len(timed.refused)
    chain.waiting = None if timed.waiting is None else _waiting(lines, stamps, timed.waiting)
    chain.running_max = timed.running_max
    if timed.accepted.size != stamps.size:
        lines = _chosen(lines, timed.accepted)
    _count(state, chain, lines, timed.effective, timed.late)


def count_waiting(state: State) -> None:
    """The files have ended: a chain's only line, which waited for company, counts after all."""
    for chain in state.chains.values():
        if chain.waiting is not None and chain.running_max is None:
            nothing = Lines(
                count=0, sizes=np.empty(0), stamps=None, names=[], codes=np.empty(0, np.int32), describe=_undescribed
            )
            lines, stamps = _with_waiting(chain.waiting, nothing, np.empty(0, np.int64))
            chain.running_max = chain.waiting.stamp
            chain.waiting = None
            chain.changed = True
            times = np.maximum(stamps, chain.edge) if chain.edge is not None else stamps
            _count(state, chain, lines, times, times > stamps)


def _undescribed(i: int) -> tuple[str, str]:
    raise IndexError(i)


def _waiting(lines: Lines, stamps: NDArray[np.int64], i: int) -> WaitingEvent:
    digest, place = lines.describe(i)
    return WaitingEvent(
        size=float(lines.sizes[i]), stamp=int(stamps[i]), stream=lines.names[lines.codes[i]], digest=digest, place=place
    )


def _with_waiting(waiting: WaitingEvent, lines: Lines, stamps: NDArray[np.int64]) -> tuple[Lines, NDArray[np.int64]]:
    """The waiting event put in front of the new ones."""
    names = [waiting.stream, *lines.names]
    codes = np.concatenate((np.zeros(1, np.int32), lines.codes + np.int32(1)))
    later = lines.describe

    def describe(i: int) -> tuple[str, str]:
        return (waiting.digest, waiting.place) if i == 0 else later(i - 1)

    joined = Lines(
        count=lines.count + 1,
        sizes=np.concatenate(([waiting.size], lines.sizes)),
        stamps=None,
        names=names,
        codes=codes,
        describe=describe,
    )
    return joined, np.concatenate((np.array([waiting.stamp], np.int64), stamps))


def _chosen(lines: Lines, accepted: NDArray[np.int64]) -> Lines:
    whole = lines.describe

    def describe(i: int) -> tuple[str, str]:
        return whole(int(accepted[i]))

    return Lines(
        count=accepted.size, sizes=lines.sizes[accepted], stamps=None, names=lines.names,
        codes=lines.codes[accepted], describe=describe,
    )  # fmt: skip


def _count(state: State, chain: Chain, lines: Lines, times: NDArray[np.int64], late: NDArray[np.bool_]) -> None:
    """Each event to the pane of its effective time."""
    refused = _beyond_cap(state, chain, lines)
    if refused:
        allowed = np.flatnonzero(~np.isin(lines.codes, refused))
        chain.rejected[TOO_MANY] += times.size - allowed.size
        lines, times, late = _chosen(lines, allowed), times[allowed], late[allowed]
    if not times.size:
        return
    chain.events += times.size
    chain.late += int(late.sum())
    state.uncommitted += times.size
    pane = state.plan.pane
    groups = groups_of(lines.codes, times // pane)
    sizes = lines.sizes
    if groups.order is not None:
        sizes, times, late = sizes[groups.order], times[groups.order], late[groups.order]
    lates = np.add.reduceat(late, groups.firsts, dtype=np.int64).tolist()
    firsts, newest = np.minimum.reduceat(times, groups.firsts), np.maximum.reduceat(times, groups.firsts)
    streams = _streams(state, chain, lines, groups, firsts)
    builders = []
    spans = zip(streams, groups.panes.tolist(), lates, newest.tolist(), firsts.tolist(), strict=True)
    for (stream, number, group_late, last, first), low, size in zip(
        spans, groups.firsts.tolist(), groups.sizes.tolist(), strict=True
    ):
        stream.first, stream.newest = min(stream.first, first), max(stream.newest, last)
        stream.events += size
        stream.late += group_late
        builder = stream.builder(number * pane)
        builder.count(sizes[low : low + size], group_late)
        builders.append(builder)
    _consider(builders, groups, sizes, times, lines.describe)


def _consider(
    builders: list[PaneBuilder],
    groups: Groups,
    sizes: NDArray[np.float64],
    times: NDArray[np.int64],
    describe: Callable[[int], tuple[str, str]],
) -> None:
    """Bring each builder the events that may be among its pane's largest: few, once the pane has many."""
    bars = np.array([builder.bar for builder in builders])
    able = np.flatnonzero(sizes >= np.repeat(bars, groups.sizes))
    cuts = np.searchsorted(able, groups.firsts)
    counts = np.diff(cuts, append=able.size)
    sizes, times = sizes[able], times[able]
    places = able if groups.order is None else groups.order[able]
    for i, low, high in zip(
        np.flatnonzero(counts).tolist(), cuts[counts > 0].tolist(), (cuts + counts)[counts > 0].tolist(), strict=True
    ):
        builders[i].consider(sizes[low:high], times[low:high], _Describe(describe, places[low:high]))


class _Describe:
    """describe, by the index among some events of a block."""

    __slots__ = ("_describe", "_places")

    def __init__(self, describe: Callable[[int], tuple[str, str]], places: NDArray[np.int64]) -> None:
        self._describe, self._places = describe, places

    def __call__(self, i: int) -> tuple[str, str]:
        return self._describe(int(self._places[i]))


def _streams(state: State, chain: Chain, lines: Lines, groups: Groups, firsts: NDArray[np.int64]) -> list[Stream]:
    """The stream of each group; new ones are made."""
    found: list[Stream] = []
    for code, first in zip(groups.codes.tolist(), firsts.tolist(), strict=True):
        name = lines.names[code] or chain.feed
        stream = state.streams.get(name)
        if stream is None:
            unit = next(feed.unit for feed in state.plan.feeds if feed.name == chain.feed)
            unit = state.plan.stream(name, unit).unit
            stream = state.streams[name] = Stream(name, chain.feed, unit, first, first)
        found.append(stream)
    return found


def _beyond_cap(state: State, chain: Chain, lines: Lines) -> list[int]:
    """Codes of the streams that the settings leave no room for, in the order in which they first appear."""
    unknown = [code for code, name in enumerate(lines.names) if (name or chain.feed) not in state.streams]
    room = state.plan.max_streams - len(state.streams)
    if len(unknown) <= room:
        return []
    present = set(np.flatnonzero(np.bincount(lines.codes)).tolist())
    new: dict[str, list[int]] = {}
    for code in unknown:
        if code in present:
            new.setdefault(lines.names[code], []).append(code)
    return [code for name in list(new)[max(0, room) :] for code in new[name]]
