"""Distances of measured sizes (continuous power law), and bounds that refuse many candidates at once.

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
either is above the best distance known, no candidate of the block can be the answer.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from monitor.tail.kernels.arithmetic import exp_nonpositive, log_in_place
from monitor.tail.kernels.compiling import helper, inner, int64, kernel
from monitor.tail.kernels.ladder import PROBES, Ladder, Scratch, Worst, distance_of, noted

SLACK = 1e-12
"""More than any rounding error of a deviation: bounds must pass a distance by this to refuse."""

# Rows of the regular grid per square root of the tail's rows: few enough to be cheap, close enough together that
# hardly a stretch between them has to be searched.
_GRID_DENSITY = 3.0


@kernel
def build(sizes: Any, counts: Any, y: Any, events: Any, spread: Any) -> Any:
    """Fill one row for each distinct size; False, with nothing but y written, when two share a logarithm.

    Parameters: sizes float64 (k,) ascending, counts int64 (k,). Written: y, spread float64 (k,), events (k + 1,).
    """
    k = sizes.size
    for i in range(k):
        y[i] = log_in_place(sizes[i])
    for i in range(1, k):
        if y[i] <= y[i - 1]:
            return False
    held = np.float64(counts[k - 1])
    total = 0.0
    events[k] = 0.0
    events[k - 1] = held
    spread[k - 1] = 0.0
    for i in range(k - 2, -1, -1):
        total += held * (y[i + 1] - y[i])
        held += counts[i]
        spread[i] = total
        events[i] = held
    return True


@helper
def _look(ladder: Ladder, row: int, j: int, worst: Worst) -> Any:
    """`worst` after comparing data and model of candidate `row` at row j."""
    events = ladder.events
    share = 1.0 / events[row]
    model = exp_nonpositive(-(events[row] / ladder.spread[row]) * (ladder.place[j] - ladder.place[row]))
    return noted(worst, j, events[j] * share - model, model - events[j + 1] * share)


@inner
def _probed(ladder: Ladder, row: int, probes: Any) -> Any:
    """Largest deviations at the remembered witnesses and at 16 rows spread over the tail."""
    rows = ladder.place.size
    worst = Worst(0.0, row, 1.0 - ladder.events[row + 1] * (1.0 / ladder.events[row]), row)
    for t in range(PROBES):
        if row < probes[t] < rows:
            worst = _look(ladder, row, probes[t], worst)
    span = rows - 1 - row
    strides = 16 if span >= 16 else span
    for g in range(1, strides + 1):
        worst = _look(ladder, row, row + (span * g) // strides, worst)
    return worst


@inner
def _searched(ladder: Ladder, row: int, worst: Worst, ends: Any, scratch: Scratch) -> Any:
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
        model = exp_nonpositive(rate * (ladder.place[j] - ladder.place[row]))
        worst = noted(worst, j, events[j] * share - model, model - events[j + 1] * share)
        if j - left > 1:
            stack[depth, 0], stack[depth, 1], models[depth, 0], models[depth, 1] = left, j, at_left, model
            depth += 1
        if right - j > 1:
            stack[depth, 0], stack[depth, 1], models[depth, 0], models[depth, 1] = j, right, model, at_right
            depth += 1
    return worst


@inner
def measured_deviations(ladder: Ladder, row: int, stop: float, scratch: Scratch) -> Any:
    """Largest deviations of candidate `row` (a Worst): exact if the distance is at most `stop`; above it, only
    so much is certain that the distance passes `stop`."""
    worst = _probed(ladder, row, scratch.probes)
    if distance_of(worst) > stop:
        return worst
    y = ladder.place
    events = ladder.events
    grid = scratch.grid
    rows = y.size
    share = 1.0 / events[row]
    rate = -(events[row] / ladder.spread[row])
    stride = max(int64(np.sqrt(rows - row) / _GRID_DENSITY), 4)
    steps = (rows - 1 - row) // stride
    for g in range(steps + 1):
        grid[g] = exp_nonpositive(rate * (y[row + g * stride] - y[row]))
    for g in range(1, steps + 1):
        j = row + g * stride
        worst = noted(worst, j, events[j] * share - grid[g], grid[g] - events[j + 1] * share)
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
def measured_bound(ladder: Ladder, p: int, q: int, j: int, above: bool) -> Any:
    """Lower bound of the distances of candidates p..q by witness j > q, from above or from below (see top)."""
    y = ladder.place
    events = ladder.events
    few = events[q]
    spread = ladder.spread[q]
    width = y[q] - y[p]
    reach = y[j] - y[q]
    if above:
        h = few * reach / spread
        if q > p:
            h = min(h, few * (reach + width) / (spread + few * width))
        return events[j] / events[p] - exp_nonpositive(-h) - SLACK
    many = events[p]
    h = many * reach / spread
    if q > p:
        h = max(h, many * (reach + width) / (spread + few * width))
    return exp_nonpositive(-h) - events[j + 1] / few - SLACK
