"""The exact scan: the candidate whose fitted tail is nearest to the data, without trying them all.

The answer is that of trying every candidate: the smallest Kolmogorov-Smirnov distance, and of equal distances the
smallest size. A good candidate found early sets a mark. Then blocks of neighbouring candidates are refused
together by one row, a witness at which an earlier candidate was far off, wherever a lower bound of all their
distances lies above the mark (measured.py, whole.py and binned.py prove the bounds). Blocks double when refused
and shrink to a quarter when not; what cannot be refused is evaluated.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from monitor.tail.kernels.arithmetic import logarithm
from monitor.tail.kernels.binned import binned_bound, binned_deviations, binned_rate, binned_walk
from monitor.tail.kernels.compiling import helper, inner, int64, kernel
from monitor.tail.kernels.ladder import (
    BINNED,
    MEASURED,
    STARTS,
    WORTH_A_GUESS,
    Best,
    Ladder,
    Near,
    Scratch,
    Worst,
    better,
    distance_of,
    neighbour_row,
    remember,
    start_row,
    witness_of,
)
from monitor.tail.kernels.measured import measured_bound, measured_deviations
from monitor.tail.kernels.whole import whole_bound, whole_deviations, whole_rate

_WALK = 32
"""Cells tried one by one before a block of them is tried again."""


@kernel
def rate_of(ladder: Ladder, row: int) -> Any:
    """The fitted exponent less one of candidate `row` (binned: per cell instead of per unit of ln(size))."""
    if ladder.law == MEASURED:
        return ladder.events[row] / ladder.spread[row]
    if ladder.law == BINNED:
        return binned_rate(ladder, row)
    return whole_rate(ladder, row)


@inner
def deviations(ladder: Ladder, row: int, stop: float, scratch: Scratch) -> Any:
    """Largest deviations of candidate `row` (a Worst): exact if the distance is at most `stop`; above it, only
    so much is certain that the distance passes `stop`."""
    if ladder.law == MEASURED:
        return measured_deviations(ladder, row, stop, scratch)
    if ladder.law == BINNED:
        return binned_deviations(ladder, row, stop, scratch)
    return whole_deviations(ladder, row, stop, scratch)


@helper
def _bound(ladder: Ladder, p: int, q: int, j: int, above: bool, scratch: Scratch) -> Any:
    if ladder.law == MEASURED:
        return measured_bound(ladder, p, q, j, above)
    if ladder.law == BINNED:
        return binned_bound(ladder, p, q, j, above)
    return whole_bound(ladder, p, q, j, above, scratch.series)


@helper
def refused(ladder: Ladder, p: int, q: int, worst: Worst, limit: float, scratch: Scratch) -> Any:
    """True when one of the two witnesses shows that every candidate in p..q is farther than `limit`."""
    for above in (True, False):
        j = worst.above_row if above else worst.below_row
        if j > q and _bound(ladder, p, q, j, above, scratch) > limit:
            return True
    return False


@inner
def _first_guesses(ladder: Ladder, last: int, best: Best, hint: int, first_hit: bool, scratch: Scratch) -> Any:
    """A good candidate soon: the hint, a few spread over all tails, then a search around the best of them."""
    events = ladder.events
    slot = int64(0)
    before = int64(-1)
    for g in range(-1, STARTS + 1 if last >= WORTH_A_GUESS else 0):
        row = hint if g < 0 else start_row(events, last, g)
        if row < 0 or row > last or row == before:
            continue
        before = row
        worst = deviations(ladder, row, best.distance, scratch)
        if better(best, row, distance_of(worst)):
            best = Best(row, distance_of(worst))
            if first_hit:
                return best
            slot = remember(scratch.probes, slot, witness_of(worst))
    if best.row < 0 or last < WORTH_A_GUESS:
        return best
    step = 0.5 * logarithm(events[0] / events[last]) / STARTS
    adjacent = False
    while not adjacent:
        moved = False
        adjacent = True
        for sign in range(2):
            row = neighbour_row(events, last, best.row, step if sign == 1 else -step)
            if row == best.row:
                continue
            adjacent = adjacent and abs(row - best.row) == 1
            worst = deviations(ladder, row, best.distance, scratch)
            slot = remember(scratch.probes, slot, witness_of(worst))
            if better(best, row, distance_of(worst)):
                best = Best(row, distance_of(worst))
                moved = True
                adjacent = False
                break
        if not moved:
            step *= 0.5
    return best


@kernel
def nearest(ladder: Ladder, last: int, least_far: float, hint: int, first_hit: bool, scratch: Scratch) -> Any:
    """The candidate in rows 0..last with the smallest distance, if that is below `least_far`.

    Parameters: hint, a row worth trying first, or -1; first_hit, stop at the first candidate nearer than
    `least_far`, whichever it is. Returns Best.
    """
    best = Best(-1, least_far)
    scratch.probes[:] = -1
    if last < 0:
        return best
    best = _first_guesses(ladder, last, best, hint, first_hit, scratch)
    if first_hit and best.row >= 0:
        return best
    slot = int64(0)
    row = int64(0)
    length = int64(1)
    worst = Worst(0.0, int64(-1), 0.0, int64(-1))
    while row <= last:
        q = min(row + length - 1, last)
        if ladder.law == BINNED and length == 1:
            end = min(row + _WALK, last + 1)
            row = binned_walk(ladder, row, end, worst, best.distance)
            if row == end:
                length = int64(2)
                continue
        elif refused(ladder, row, q, worst, best.distance, scratch):
            row = q + 1
            length *= 2
            continue
        if length > 1:
            length = max(length >> 2, 1)
            continue
        worst = deviations(ladder, row, best.distance, scratch)
        slot = remember(scratch.probes, slot, witness_of(worst))
        if better(best, row, distance_of(worst)):
            best = Best(row, distance_of(worst))
            if first_hit:
                return best
        row += 1
    return best


@inner
def _edge(ladder: Ladder, last: int, limit: float, scratch: Scratch) -> Any:
    """Last candidate no farther than `limit`, walking down from the top; -1 if there is none."""
    row = last
    length = int64(1)
    worst = Worst(0.0, int64(-1), 0.0, int64(-1))
    while row >= 0:
        p = max(row - length + 1, 0)
        if refused(ladder, p, row, worst, limit, scratch):
            row = p - 1
            length *= 2
            continue
        if length > 1:
            length = max(length >> 2, 1)
            continue
        worst = deviations(ladder, row, limit, scratch)
        if distance_of(worst) <= limit:
            return row
        row -= 1
    return -1


@kernel
def near(ladder: Ladder, last: int, limit: float, best_row: Any, scratch: Scratch) -> Any:
    """Range of rows and rates (exponent minus one) of all candidates no farther than `limit` (a Near).

    Walking up, a candidate is only evaluated where its rate would widen the range found so far.
    """
    end = _edge(ladder, last, limit, scratch)
    rate = rate_of(ladder, best_row)
    found = Near(-1, end, rate, rate)
    row = int64(0)
    length = int64(1)
    worst = Worst(0.0, int64(-1), 0.0, int64(-1))
    while row <= end:
        rate = rate_of(ladder, row)
        if length == 1 and found.first >= 0 and found.least <= rate <= found.most:
            row += 1
            continue
        q = min(row + length - 1, end)
        if refused(ladder, row, q, worst, limit, scratch):
            row = q + 1
            length *= 2
            continue
        if length > 1:
            length = max(length >> 2, 1)
            continue
        worst = deviations(ladder, row, limit, scratch)
        if distance_of(worst) <= limit:
            first = row if found.first < 0 else found.first
            found = Near(first, end, min(found.least, rate), max(found.most, rate))
        row += 1
    return found


@kernel
def distance_at(ladder: Ladder, row: int, scratch: Scratch) -> Any:
    """Distance of one candidate."""
    scratch.probes[:] = -1
    return distance_of(deviations(ladder, row, np.inf, scratch))
