"""Distances of measured sizes on the grid, and bounds that refuse many candidates at once.

A row is an occupied cell k, ascending; above the lower edge of cell k_i a power law gives the number of cells K - k_i
a geometric law, P(K >= k) = exp(-g_i (k - k_i)), with the exponent of highest likelihood in closed form,
g_i = ln(1 + W_i/S_i), S_i = sum of w_k (k - k_i); alpha = 1 + g/width (Y. Virkar & A. Clauset, Annals of Applied
Statistics 8 (2014) 89-119, for bins equally wide in ln(size)). The distance is the largest over all edges above:
between occupied cells the data's survival stands still, so it is the largest of W_j/W_i - P(K >= k_j) and
P(K >= k_j + 1) - W_{j+1}/W_i.

**Many candidates refused by one row.** As for measured sizes (measured.py) with t = k_q - k_i in [0, T], Y = k_j - k_q:
W_q/(S_q + W_q t) <= W_i/S_i <= W_p/(S_q + W_q t). With c = S_q/W_q the exponent h_i = g_i (Y + t) is at least
f(z) = (z + b) ln(1 + 1/z), z = c + t, b = Y - c. Its derivative has the sign of r(z) - b, where
r(z) = z(z + 1) ln(1 + 1/z) - z rises from 0 to 1/2, because r'(z) = (2z + 1) ln(1 + 1/z) - 2 >= 0. So f falls for
b >= 1/2 and rises for b <= 0; between, z ln(1 + 1/z) rises and b ln(1 + 1/z) falls, and each takes its least at an
end. From above h_i is at most (Y + t) ln(1 + (W_p/W_q)/(c + t)) <= (Y + T) ln(1 + W_p/S_q).
"""

from __future__ import annotations

from typing import Any

from monitor.tail.kernels.arithmetic import exp_apart, exp_nonpositive, log_one_plus, logarithm
from monitor.tail.kernels.compiling import inner
from monitor.tail.kernels.ladder import PROBES, Ladder, Scratch, Worst, distance_of, noted

SLACK = 1e-12
"""More than any rounding error of a deviation: bounds must pass a distance by this to refuse."""

_STRIDE = 32
"""Rows looked at together; scratch.grid has room for more."""


@inner
def _log1p(x: float) -> Any:
    """ln(1 + x) for x >= 0."""
    if x < 0.4:
        return log_one_plus(x)
    return logarithm(1.0 + x)


@inner
def binned_rate(ladder: Ladder, row: int) -> Any:
    """g of candidate `row`: exponent less one, per cell."""
    return _log1p(ladder.events[row] / ladder.spread[row])


@inner
def _look(ladder: Ladder, row: int, j: int, rate: float, worst: Worst) -> Any:
    """`worst` after comparing data and model at the edges of row j."""
    share = 1.0 / ladder.events[row]
    at = exp_apart(-rate * (ladder.place[j] - ladder.place[row]))
    beyond = exp_apart(-rate * (ladder.place[j] + 1.0 - ladder.place[row]))
    return noted(worst, j, ladder.events[j] * share - at, beyond - ladder.events[j + 1] * share)


@inner
def binned_deviations(ladder: Ladder, row: int, stop: float, scratch: Scratch) -> Any:
    """Largest deviations of candidate `row` (a Worst): exact if the distance is at most `stop`.

    A grid has some thousands of rows at most, so beyond a few probes all are looked at, in a loop that compiles to
    vector instructions.
    """
    rate = binned_rate(ladder, row)
    rows = ladder.place.size
    worst = _look(ladder, row, row, rate, Worst(0.0, row, 0.0, row))
    for t in range(PROBES):
        if row < scratch.probes[t] < rows:
            worst = _look(ladder, row, scratch.probes[t], rate, worst)
    span = rows - 1 - row
    strides = 16 if span >= 16 else span
    for g in range(1, strides + 1):
        worst = _look(ladder, row, row + (span * g) // strides, rate, worst)
    if distance_of(worst) > stop:
        return worst
    return _all_looked_at(ladder, row, rate, worst, stop, scratch)


@inner
def _all_looked_at(ladder: Ladder, row: int, rate: float, worst: Worst, stop: float, scratch: Scratch) -> Any:
    """`worst` after a walk over the rows in strides; a stride is skipped where its ends show that nothing in it
    can be worse, by the same argument as in measured.py."""
    place = ladder.place
    events = ladder.events
    share = 1.0 / events[row]
    rows = place.size
    models = scratch.grid
    left = row
    after_left = exp_nonpositive(-rate)
    while left < rows - 1:
        right = min(left + _STRIDE, rows - 1)
        at_right = exp_apart(-rate * (place[right] - place[row]))
        after_right = exp_apart(-rate * (place[right] + 1.0 - place[row]))
        worst = noted(worst, right, events[right] * share - at_right, after_right - events[right + 1] * share)
        enough = distance_of(worst) - SLACK
        if events[left + 1] * share - at_right > enough or after_left - events[right] * share > enough:
            for j in range(left + 1, right + 1):
                models[j - left] = exp_nonpositive(-rate * (place[j] - place[row]))
            for j in range(left + 1, right):
                # The upper edge of an occupied cell is mostly the lower edge of the next.
                beyond = models[j + 1 - left]
                if place[j + 1] > place[j] + 1.0:
                    beyond = exp_apart(-rate * (place[j] + 1.0 - place[row]))
                worst = noted(worst, j, events[j] * share - models[j - left], beyond - events[j + 1] * share)
            if distance_of(worst) > stop:
                return worst
        left = right
        after_left = after_right
    return worst


@inner
def binned_bound(ladder: Ladder, p: int, q: int, j: int, above: bool) -> Any:
    """Lower bound of the distances of candidates p..q by witness j > q, from above or from below (see top)."""
    events = ladder.events
    few = events[q]
    width = ladder.place[q] - ladder.place[p]
    reach = ladder.place[j] - ladder.place[q]
    if above:
        near = ladder.spread[q] / few
        far = near + width
        ahead = reach - near
        if ahead >= 0.5:
            h = (far + ahead) * _log1p(1.0 / far)
        elif ahead <= 0.0:
            h = (near + ahead) * _log1p(1.0 / near)
        else:
            h = near * _log1p(1.0 / near) + ahead * _log1p(1.0 / far)
        return events[j] / events[p] - exp_apart(-h) - SLACK
    h = (reach + 1.0 + width) * _log1p(events[p] / ladder.spread[q])
    return exp_apart(-h) - events[j + 1] / few - SLACK


@inner
def binned_walk(ladder: Ladder, row: int, end: int, worst: Worst, limit: float) -> Any:
    """The first of candidates row..end-1 that neither witness of `worst` shows to be farther than `limit`; `end` if
    there is none.

    Where events are many, distances are small beside what a cell holds: bounds for blocks then say nothing, but
    neighbouring candidates still are far off at the same row, one by one.
    """
    place = ladder.place
    events = ladder.events
    over = worst.above_row
    under = worst.below_row
    for i in range(row, end):
        share = 1.0 / events[i]
        rate = _log1p(events[i] / ladder.spread[i])
        if over > i and events[over] * share - exp_nonpositive(-rate * (place[over] - place[i])) - SLACK > limit:
            continue
        beyond = place[under] + 1.0 - place[i]
        if under > i and exp_nonpositive(-rate * beyond) - events[under + 1] * share - SLACK > limit:
            continue
        return i
    return end
