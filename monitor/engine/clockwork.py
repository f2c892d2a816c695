"""Time that does not depend on luck: effective times of a chain's lines.

For each line: floor = the running maximum of the stamps before it, minus `lateness`, but at least the
chain's edge; effective time = max(stamp, floor). The result depends on the order of lines in their chain
and on nothing else: not on batching, not on what other chains delivered meanwhile.

A stamp more than `ahead` past the maximum waits for the chain's next line: if that one lies as far ahead,
both count (the clock really jumped: a weekend, a stopped plant), else the waiting one is refused. The first
line of a chain waits likewise, since there is nothing yet to hold it against.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

_MOST_LOOKS = 100  # for the next jump of one block: each look reads all the rest


@dataclass(frozen=True, slots=True, kw_only=True)
class Rules:
    """The bounds, in ns: lines may be out of order by `lateness`, and jump ahead by `ahead`."""

    lateness: int
    ahead: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Timed:
    """Effective times of the accepted lines.

    accepted     int64 (m,), indices into the stamps given, in order
    effective    int64 (m,), ns
    late         bool (m,): the stamp was below the floor
    refused      indices of lines whose stamp was ahead of its time
    waiting      index of the line that waits for the next one, or None
    running_max  after the accepted lines
    """

    accepted: NDArray[np.int64]
    effective: NDArray[np.int64]
    late: NDArray[np.bool_]
    refused: tuple[int, ...]
    waiting: int | None
    running_max: int | None


def effective_times(
    stamps: NDArray[np.int64], running_max: int | None, edge: int | None, rules: Rules, *, waits: bool
) -> Timed:
    """Effective times of stamps, int64 (k,) ns, in chain order.

    Parameters: running_max and edge of the chain before them; waits, the first stamp given is one that waited.
    """
    accepted, refused, waiting = _choose(stamps, running_max, rules.ahead, waits)
    chosen = stamps if accepted.size == stamps.size else stamps[accepted]
    if not chosen.size:
        empty = np.empty(0, np.int64)
        return Timed(accepted=accepted, effective=empty, late=empty.astype(bool), refused=refused, waiting=waiting,
                     running_max=running_max)  # fmt: skip
    start = np.int64(chosen[0] if running_max is None else running_max)
    before = np.maximum.accumulate(np.concatenate(([start], chosen)))
    floor = before[:-1] - rules.lateness
    if edge is not None:
        floor = np.maximum(floor, edge)
    return Timed(
        accepted=accepted,
        effective=np.maximum(chosen, floor),
        late=chosen < floor,
        refused=refused,
        waiting=waiting,
        running_max=int(before[-1]),
    )


def _choose(
    stamps: NDArray[np.int64], running_max: int | None, ahead: int, waits: bool
) -> tuple[NDArray[np.int64], tuple[int, ...], int | None]:
    """Which lines are accepted, which refused, which one waits."""
    everything = np.arange(stamps.size, dtype=np.int64)
    if running_max is not None and not waits and _calm(stamps, running_max, ahead) == stamps.size:
        return everything, (), None
    return _choose_slowly(stamps, running_max, ahead, waits)


def _calm(stamps: NDArray[np.int64], top: int, ahead: int) -> int:
    """How many stamps there are before the first one that lies too far ahead of those before it."""
    before = np.maximum.accumulate(np.concatenate(([np.int64(top)], stamps)))[:-1]
    jumps = stamps - before > ahead
    return int(jumps.argmax()) if jumps.any() else stamps.size


def _choose_slowly(
    stamps: NDArray[np.int64], top: int | None, ahead: int, waits: bool
) -> tuple[NDArray[np.int64], tuple[int, ...], int | None]:
    """The rule line by line, where some stamp jumps; the calm between jumps is passed over at once."""
    accepted = np.zeros(stamps.size, bool)
    refused: list[int] = []
    pending: int | None = 0 if waits and stamps.size else None
    i, looks = 0 if pending is None else 1, _MOST_LOOKS
    while i < stamps.size:
        if pending is None and top is not None and looks:
            looks -= 1
            calm = stamps[i : i + _calm(stamps[i:], top, ahead)]
            if calm.size:
                accepted[i : i + calm.size] = True
                top = max(top, int(calm.max()))
                i += calm.size
                continue
        stamp = int(stamps[i])
        if pending is not None:
            if _confirms(stamp, int(stamps[pending]), top, ahead):
                accepted[pending] = True
                top = int(stamps[pending]) if top is None else max(top, int(stamps[pending]))
            else:
                refused.append(pending)
            pending = None
        if top is None or stamp - top > ahead:
            pending = i
        else:
            accepted[i] = True
            top = max(top, stamp)
        i += 1
    return np.flatnonzero(accepted), tuple(refused), pending


def _confirms(stamp: int, pending: int, top: int | None, ahead: int) -> bool:
    """Does the next line bear the waiting one out?"""
    return stamp >= pending - ahead if top is None else stamp - top > ahead
