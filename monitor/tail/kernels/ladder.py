"""What the three scans share: the rows a scan runs over, its scratch space, and how bests are kept.

A scan looks for the candidate (a row) whose fitted tail is nearest to the data in the Kolmogorov-Smirnov
distance. Equal distances: the row with the smallest size wins.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from monitor.tail.kernels.arithmetic import exponential, logarithm
from monitor.tail.kernels.compiling import helper, kernel

PROBES = 8
"""Witnesses remembered: rows at which recent candidates were far off."""

STARTS = 20
"""Candidates tried first, geometric in the number of events above them."""


class Scratch(NamedTuple):
    """Space that the scans write in, made once a thread.

    probes  int64 (PROBES,)   remembered witnesses, -1 where there is none yet
    ends    int64 (128, 2)    stretches still to be searched
    model   float64 (128, 2)  the model's survival at their ends
    grid    float64 (g,)      the model's survival on a regular grid of rows
    terms   float64 (1024,)   sums of a zeta function near its start
    """

    probes: Any
    ends: Any
    model: Any
    grid: Any
    terms: Any


class Worst(NamedTuple):
    """Largest deviation of data above model, and of model above data, with the rows where they are."""

    above: float
    above_row: int
    below: float
    below_row: int


class Best(NamedTuple):
    """The best candidate so far; row -1 when none is better than the distance started from."""

    row: int
    distance: float


class Near(NamedTuple):
    """Candidates whose distance is at most a limit: first and last row, smallest and largest exponent."""

    first: int
    last: int
    least: float
    most: float


@helper
def new_scratch(rows):
    """Scratch space for scans of up to `rows` rows."""
    return Scratch(
        np.full(PROBES, -1, np.int64),
        np.empty((128, 2), np.int64),
        np.empty((128, 2)),
        np.empty(np.int64(4.0 * np.sqrt(rows + 1.0)) + 64),
        np.empty(1024),
    )


@helper
def distance_of(worst):
    return worst.above if worst.above > worst.below else worst.below


@helper
def witness_of(worst):
    return worst.above_row if worst.above >= worst.below else worst.below_row


@helper
def remember(probes, slot, row):
    """Keep a witness; returns the slot for the next one."""
    for t in range(PROBES):
        if probes[t] == row:
            return slot
    probes[slot] = row
    return (slot + 1) % PROBES


@helper
def noted(worst, row, model, data, data_after):
    """`worst` after a look at one row: model's survival against the data's before and after the step there."""
    over = data - model
    under = model - data_after
    return Worst(
        over if over > worst.above else worst.above,
        row if over > worst.above else worst.above_row,
        under if under > worst.below else worst.below,
        row if under > worst.below else worst.below_row,
    )


@helper
def better(best, row, distance):
    """True when this candidate takes the lead: smaller distance, or the same at a smaller size."""
    return distance < best.distance or (distance == best.distance and row < best.row)


@kernel
def row_with(events, last, wanted):
    """Smallest row in 0..last with at most `wanted` events at or above it; `last` if there is none."""
    low = 0
    high = last
    while low < high:
        middle = (low + high) >> 1
        if events[middle] <= wanted:
            high = middle
        else:
            low = middle + 1
    return low


@kernel
def start_row(events, last, g):
    """The g-th of STARTS + 1 candidates spread geometrically in their numbers of events."""
    high = logarithm(events[0])
    low = logarithm(events[last])
    return row_with(events, last, exponential(high + (low - high) * g / STARTS) * (1.0 + 1e-12))


@kernel
def neighbour_row(events, last, row, step):
    """The candidate whose tail holds exp(step) times as many events."""
    return row_with(events, last, exponential(logarithm(events[row]) + step))


@kernel
def last_candidate(events, least):
    """Last row with at least `least` events and another row above it; -1 if there is none."""
    row = events.size - 3
    while row >= 0 and events[row] < least:
        row -= 1
    return row
