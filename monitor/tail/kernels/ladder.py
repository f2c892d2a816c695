"""What the three laws share: the rows that a scan runs over, its scratch space, and how bests are kept."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from monitor.tail.kernels.arithmetic import exponential, logarithm
from monitor.tail.kernels.compiling import helper, inner, kernel

PROBES = 8
"""Witnesses remembered: rows at which recent candidates were far off."""

STARTS = 20
"""Candidates tried first, geometric in the number of events above them."""


WORTH_A_GUESS = 64
"""With fewer candidates than this they are simply tried in turn."""

MEASURED = 0
WHOLE = 1
BINNED = 2


class Ladder(NamedTuple):
    """The distinct sizes of a sample, ascending, with what every candidate above them needs to know.

    law     MEASURED, WHOLE or BINNED
    place   float64 (K,)      ln(size), whole size (on the grid: lowest of the cell), or number of the cell
    beyond  float64 (K,)      whole sizes only: the lowest whole size that no longer belongs to the row
    events  float64 (K + 1,)  W_i, events in rows i and above; W_K = 0
    spread  float64 (K,)      S_i, sum over rows k >= i of w_k times how far k lies above i: in ln(size), or cells
    within  float64 (K,)      whole sizes on the grid only: sum over k >= i of w_k times the variance of ln(size) in k
    """

    law: int
    place: Any
    beyond: Any
    events: Any
    spread: Any
    within: Any


class Scratch(NamedTuple):
    """Space that the scans write in, made once a thread.

    probes  int64 (PROBES,)   remembered witnesses, -1 where there is none yet
    ends    int64 (128, 2)    stretches still to be searched
    model   float64 (128, 2)  the model's survival at their ends
    grid    float64 (g,)      the model's survival on a regular grid of rows
    terms   float64 (512,)    whole sizes: sums of a zeta function from its start on, one by one
    series  float64 (9,)      whole sizes: coefficients of its Euler-Maclaurin series
    """

    probes: Any
    ends: Any
    model: Any
    grid: Any
    terms: Any
    series: Any


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
    """Candidates whose distance is at most a limit: first and last row, least and largest rate."""

    first: int
    last: int
    least: float
    most: float


def new_scratch(rows: int) -> Scratch:
    """Scratch space for scans of up to `rows` rows."""
    return Scratch(
        probes=np.full(PROBES, -1, np.int64),
        ends=np.empty((128, 2), np.int64),
        model=np.empty((128, 2)),
        grid=np.empty(int(4.0 * np.sqrt(rows + 1.0)) + 64),
        terms=np.empty(512),
        series=np.empty(9),
    )


@helper
def distance_of(worst: Worst) -> Any:
    return worst.above if worst.above > worst.below else worst.below


@helper
def witness_of(worst: Worst) -> Any:
    return worst.above_row if worst.above >= worst.below else worst.below_row


@helper
def remember(probes: Any, slot: int, row: int) -> Any:
    """Keep a witness; returns the slot for the next one."""
    for t in range(PROBES):
        if probes[t] == row:
            return slot
    probes[slot] = row
    return (slot + 1) % PROBES


@helper
def noted(worst: Worst, row: int, over: float, under: float) -> Any:
    """`worst` after a look at one row: by how much the data lie over the model there, and under it."""
    return Worst(
        over if over > worst.above else worst.above,
        row if over > worst.above else worst.above_row,
        under if under > worst.below else worst.below,
        row if under > worst.below else worst.below_row,
    )


@helper
def better(best: Best, row: int, distance: float) -> Any:
    """True when this candidate takes the lead: smaller distance, or the same at a smaller size."""
    return distance < best.distance or (distance == best.distance and row < best.row)


@inner
def row_with(events: Any, last: int, wanted: float) -> Any:
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


@inner
def start_row(events: Any, last: int, g: int) -> Any:
    """The g-th of STARTS + 1 candidates spread geometrically in their numbers of events."""
    high = logarithm(events[0])
    low = logarithm(events[last])
    return row_with(events, last, exponential(high + (low - high) * g / STARTS) * (1.0 + 1e-12))


@inner
def neighbour_row(events: Any, last: int, row: int, step: float) -> Any:
    """The candidate whose tail holds exp(step) times as many events."""
    return row_with(events, last, exponential(logarithm(events[row]) + step))


@kernel
def last_candidate(events: Any, least: int) -> Any:
    """Last row with at least `least` events and another row above it; -1 if there is none."""
    row = events.size - 3
    while row >= 0 and events[row] < least:
        row -= 1
    return row
