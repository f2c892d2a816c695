"""The exact scan for measured sizes (continuous power law), in far less than the square of the rows.

A row is a distinct y = ln(size), ascending; W_i events at or above row i (W_K = 0); S_i = sum of w_k (y_k - y_i)
over rows k >= i, built from the gaps, so that every term is positive. Candidate i fits the survival function
M_i(j) = exp(-(W_i / S_i)(y_j - y_i)), the maximum-likelihood exponent (Clauset, Shalizi & Newman 2009, eq. 3.1);
its distance is the supremum over the real line, max over j >= i of W_j/W_i - M_i(j) and M_i(j) - W_{j+1}/W_i.

**One distance without looking at every row.** The data's survival and the model's both fall, so strictly
between rows l and r the deviations are at most W_{l+1}/W_i - M_r and M_l - W_r/W_i. A stretch where neither
bound passes the largest deviation found is done with; else it is halved.

**Many candidates refused by one row.** Take candidates p..q and a witness j > q; T = y_q - y_p, Y = y_j - y_q,
t = y_q - y_i in [0, T]. Then S_i = S_q + C with C the integral of the number of events above, over [y_i, y_q], so
W_q t <= C <= W_i t. The exponent of the model at j, h_i = W_i (Y + t)/(S_q + C), obeys
    h_i >= W_i (Y + t)/(S_q + W_i t) >= W_q (Y + t)/(S_q + W_q t)      (the middle one rises with W_i)
    h_i <= W_i (Y + t)/(S_q + W_q t) <= W_p (Y + t)/(S_q + W_q t),
and both outer expressions are Moebius functions of t, hence monotone on [0, T]: their extremes are at t = 0 or T.
So every distance in the block is at least W_j/W_p - exp(-h_least) and at least exp(-h_most) - W_{j+1}/W_q. If
either is above the best distance known, no candidate of the block can be the answer. Blocks double when
refused and shrink to a quarter when not; what cannot be refused is evaluated, so the answer is exact.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from monitor.tail.kernels.arithmetic import exp_nonpositive, logarithm
from monitor.tail.kernels.compiling import helper, kernel
from monitor.tail.kernels.ladder import (
    PROBES,
    STARTS,
    Best,
    Near,
    Worst,
    better,
    distance_of,
    last_candidate,
    neighbour_row,
    new_scratch,
    noted,
    remember,
    start_row,
    witness_of,
)

SLACK = 1e-12
"""More than any rounding error of a deviation: a bound must pass the best distance by this to refuse."""

# Rows of the regular grid per square root of the tail's rows: few enough to be cheap, close enough together that
# hardly a stretch between them has to be searched.
_GRID_DENSITY = 3.0


class Ladder(NamedTuple):
    """y float64 (K,) ascending; events W float64 (K + 1,), falling to 0; spread S float64 (K,)."""

    y: Any
    events: Any
    spread: Any


@kernel
def build(sizes, counts, y, first, events, spread):
    """Fill the ladder of distinct sizes with counts; sizes whose logarithms agree become one row.

    Parameters: sizes float64 (k,) ascending, counts int64 (k,). Written: y, spread (k,), events (k + 1,),
    first int64 (k,) index of each row's smallest size. Returns the number of rows.
    """
    for i in range(sizes.size):
        y[i] = logarithm(sizes[i])
    rows = 0
    for i in range(sizes.size):
        if rows > 0 and y[i] <= y[rows - 1]:
            events[rows - 1] += counts[i]
        else:
            y[rows] = y[i]
            first[rows] = i
            events[rows] = counts[i]
            rows += 1
    fill_suffixes(y, events, spread, rows)
    return rows


@kernel
def fill_suffixes(y, events, spread, rows):
    """Turn events in each row into events at or above it, and fill the spread."""
    events[rows] = 0.0
    spread[rows - 1] = 0.0
    total = 0.0
    for i in range(rows - 2, -1, -1):
        total += events[i + 1] * (y[i + 1] - y[i])
        spread[i] = total
        events[i] += events[i + 1]


@helper
def _look(ladder, row, j, worst):
    """`worst` after comparing data and model of candidate `row` at row j."""
    events = ladder.events
    share = 1.0 / events[row]
    model = exp_nonpositive(-(events[row] / ladder.spread[row]) * (ladder.y[j] - ladder.y[row]))
    return noted(worst, j, model, events[j] * share, events[j + 1] * share)


@kernel
def _probed(ladder, row, probes):
    """Largest deviations at the remembered witnesses and at 16 rows spread over the tail."""
    rows = ladder.y.size
    worst = Worst(0.0, row, 1.0 - ladder.events[row + 1] * (1.0 / ladder.events[row]), row)
    for t in range(PROBES):
        if row < probes[t] < rows:
            worst = _look(ladder, row, probes[t], worst)
    span = rows - 1 - row
    strides = 16 if span >= 16 else span
    for g in range(1, strides + 1):
        worst = _look(ladder, row, row + (span * g) // strides, worst)
    return worst


@kernel
def _searched(ladder, row, worst, ends, scratch):
    """`worst` after searching the stretch between two rows; ends = (left, right, model at left, model at right)."""
    events = ladder.events
    share = 1.0 / events[row]
    rate = -(events[row] / ladder.spread[row])
    stack = scratch.ends
    models = scratch.model
    stack[0, 0], stack[0, 1], models[0, 0], models[0, 1] = ends
    depth = 1
    while depth > 0:
        depth -= 1
        left = stack[depth, 0]
        right = stack[depth, 1]
        at_left = models[depth, 0]
        at_right = models[depth, 1]
        enough = distance_of(worst) - SLACK
        if events[left + 1] * share - at_right <= enough and at_left - events[right] * share <= enough:
            continue
        j = (left + right) >> 1
        model = exp_nonpositive(rate * (ladder.y[j] - ladder.y[row]))
        worst = noted(worst, j, model, events[j] * share, events[j + 1] * share)
        if j - left > 1:
            stack[depth, 0], stack[depth, 1], models[depth, 0], models[depth, 1] = left, j, at_left, model
            depth += 1
        if right - j > 1:
            stack[depth, 0], stack[depth, 1], models[depth, 0], models[depth, 1] = j, right, model, at_right
            depth += 1
    return worst


@kernel
def deviations(ladder, row, stop, scratch):
    """Largest deviations of candidate `row` (a Worst): exact if the distance is at most `stop`; above it, only
    so much is certain that the distance passes `stop`."""
    worst = _probed(ladder, row, scratch.probes)
    if distance_of(worst) > stop:
        return worst
    y = ladder.y
    events = ladder.events
    grid = scratch.grid
    rows = y.size
    share = 1.0 / events[row]
    rate = -(events[row] / ladder.spread[row])
    stride = max(np.int64(np.sqrt(rows - row) / _GRID_DENSITY), 4)
    steps = (rows - 1 - row) // stride
    for g in range(steps + 1):
        grid[g] = exp_nonpositive(rate * (y[row + g * stride] - y[row]))
    for g in range(1, steps + 1):
        j = row + g * stride
        worst = noted(worst, j, grid[g], events[j] * share, events[j + 1] * share)
    for g in range(steps + 1):
        left = row + g * stride
        right = min(left + stride, rows)
        at_right = grid[g + 1] if g < steps else 0.0
        enough = distance_of(worst) - SLACK
        if left + 1 < right and (
            events[left + 1] * share - at_right > enough or grid[g] - events[right] * share > enough
        ):
            worst = _searched(ladder, row, worst, (left, right, grid[g], at_right), scratch)
            if distance_of(worst) > stop:
                break
    return worst


@helper
def _refuses(ladder, p, q, j, above):
    """Lower bound of the distances of candidates p..q by witness j > q, from above or from below (see top)."""
    y = ladder.y
    events = ladder.events
    few = events[q]
    spread = ladder.spread[q]
    width = y[q] - y[p]
    reach = y[j] - y[q]
    if above:
        h = few * reach / spread
        if q > p:
            h = min(h, few * (reach + width) / (spread + few * width))
        return events[j] / events[p] - exp_nonpositive(-h)
    many = events[p]
    h = many * reach / spread
    if q > p:
        h = max(h, many * (reach + width) / (spread + few * width))
    return exp_nonpositive(-h) - events[j + 1] / few


@helper
def refused(ladder, p, q, worst, limit):
    """True when one of the two witnesses shows that every candidate in p..q is farther than `limit`."""
    if worst.above_row > q and _refuses(ladder, p, q, worst.above_row, True) > limit:
        return True
    return worst.below_row > q and _refuses(ladder, p, q, worst.below_row, False) > limit


@kernel
def _first_guesses(ladder, last, best, hint, first_hit, scratch):
    """A good candidate soon: the hint, a few spread over all tails, then a search around the best of them."""
    events = ladder.events
    slot = 0
    for g in range(-1, STARTS + 1):
        row = hint if g < 0 else start_row(events, last, g)
        if row < 0 or row > last:
            continue
        worst = deviations(ladder, row, best.distance, scratch)
        if better(best, row, distance_of(worst)):
            best = Best(row, distance_of(worst))
            if first_hit:
                return best
            slot = remember(scratch.probes, slot, witness_of(worst))
    if best.row < 0:
        return best
    step = 0.5 * logarithm(events[0] / events[last]) / STARTS
    while step * events[best.row] >= 0.5:
        moved = False
        for sign in range(2):
            row = neighbour_row(events, last, best.row, step if sign == 1 else -step)
            if row == best.row:
                continue
            worst = deviations(ladder, row, best.distance, scratch)
            slot = remember(scratch.probes, slot, witness_of(worst))
            if better(best, row, distance_of(worst)):
                best = Best(row, distance_of(worst))
                moved = True
                break
        if not moved:
            step *= 0.5
    return best


@kernel
def nearest(ladder, last, least_far, hint, first_hit, scratch):
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
    slot = 0
    row = 0
    length = 1
    worst = Worst(0.0, -1, 0.0, -1)
    while row <= last:
        q = min(row + length - 1, last)
        if refused(ladder, row, q, worst, best.distance + SLACK):
            row = q + 1
            length *= 2
            continue
        if length > 1:
            length = max(length >> 2, 1)
            continue
        worst = deviations(ladder, row, best.distance + SLACK, scratch)
        slot = remember(scratch.probes, slot, witness_of(worst))
        if better(best, row, distance_of(worst)):
            best = Best(row, distance_of(worst))
            if first_hit:
                return best
        row += 1
    return best


@kernel
def _edge(ladder, last, limit, scratch):
    """Last candidate no farther than `limit`, walking down from the top; -1 if there is none."""
    row = last
    length = 1
    worst = Worst(0.0, -1, 0.0, -1)
    while row >= 0:
        p = max(row - length + 1, 0)
        if refused(ladder, p, row, worst, limit + SLACK):
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
def near(ladder, last, limit, best_row, scratch):
    """Range of rows and rates (exponent minus one) of all candidates no farther than `limit` (a Near).

    Walking up, a candidate is only evaluated where its rate would widen the range found so far.
    """
    end = _edge(ladder, last, limit, scratch)
    rate = ladder.events[best_row] / ladder.spread[best_row]
    found = Near(-1, end, rate, rate)
    row = 0
    length = 1
    worst = Worst(0.0, -1, 0.0, -1)
    while row <= end:
        rate = ladder.events[row] / ladder.spread[row]
        if length == 1 and found.first >= 0 and found.least <= rate <= found.most:
            row += 1
            continue
        q = min(row + length - 1, end)
        if refused(ladder, row, q, worst, limit + SLACK):
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
def search(ladder, least, closeness):
    """The whole fit: (Best, Near), the nearest candidate of at least `least` events and the range of those
    whose distance is at most `closeness` times the smallest. Best.row is -1 when there is no candidate."""
    scratch = new_scratch(ladder.y.size)
    last = last_candidate(ladder.events, least)
    best = nearest(ladder, last, np.inf, -1, False, scratch)
    if best.row < 0:
        return best, Near(-1, -1, 0.0, 0.0)
    return best, near(ladder, last, closeness * best.distance, best.row, scratch)


@kernel
def distance_at(ladder, row):
    """Distance of one candidate."""
    scratch = new_scratch(ladder.y.size)
    return distance_of(deviations(ladder, row, np.inf, scratch))
