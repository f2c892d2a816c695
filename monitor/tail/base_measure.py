"""Points and weights that turn sums over integers and integrals over sizes into one weighted sum.

Every rival tail needs sums of the form sum over x >= xmin of g(x), or the integral of g, for a density g known up
to its constant. Written over y = ln(x / xmin), with f(y) dy = g(x) dx, both become sum_j exp(log_weight_j) f(y_j):
the laws need no case for 'measured' or 'whole', and one and the same rule serves the power law and its rivals, so
that its error cancels from their likelihood ratio.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from math import ceil, comb, log, sqrt

import numpy as np
from numpy.typing import NDArray
from scipy.special import roots_legendre

from monitor.tail.judgement import Counting
from monitor.tail.sample import Sample
from storage.grid import CELL_WIDTH, edges

_ORDER = 16
_SUMMED = 512
"""Integers summed one by one before the rest is an integral with end corrections."""
_ALL_SMOOTH = 1e7
"""From here a sum over integers is the integral from half a unit below, to (slope / x)^2 / 24 < 1e-12."""
_GREGORY = (1 / 2, -1 / 12, -1 / 24, -19 / 720, -3 / 160, -863 / 60480)
_WIDEST = 2.0
_MOST_PANELS = 4000


@dataclass(frozen=True, slots=True)
class Nodes:
    """Points y = ln(x / xmin), float64 (m,) ascending, and the logarithms of their weights, float64 (m,)."""

    y: NDArray[np.float64]
    log_weight: NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Reach:
    """How far and how finely the law's support is covered, all in y.

    stop    where nothing of any law is left
    inner   end of the stretch that holds the data
    fine    widest panel inside it
    """

    stop: float
    inner: float
    fine: float


@dataclass(frozen=True, slots=True)
class TailData:
    """The tail's events as groups of points; a group is one size, or one cell of the grid.

    nodes   the points of all groups, one after another
    starts  int64 (k,) first point of each group, or None when each group is one point of weight 1
    counts  float64 (k,) events in each group
    xmin    lower end of the tail
    """

    nodes: Nodes
    starts: NDArray[np.int64] | None
    counts: NDArray[np.float64]
    xmin: float

    @property
    def n(self) -> float:
        """Events in the tail."""
        return float(self.counts.sum())

    def middles(self) -> NDArray[np.float64]:
        """One y a group, float64 (k,): its only point, or the middle one."""
        if self.starts is None:
            return self.nodes.y
        ends = np.append(self.starts[1:], len(self.nodes.y))
        middles: NDArray[np.float64] = self.nodes.y[(self.starts + ends) // 2]
        return middles


def summed(weights: NDArray[np.float64], values: NDArray[np.float64]) -> float:
    """Sum of weights times values.

    Not by a BLAS: its order of adding depends on the threads it finds, and a verdict must be the same to the last
    bit when it is derived again; besides, its threads spin where other work waits.
    """
    return float(np.sum(weights * values))


@lru_cache(maxsize=4)
def _legendre(order: int) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Gauss-Legendre points and weights on [0, 1]."""
    points, weights = roots_legendre(order)
    return (points + 1) / 2, weights / 2


@lru_cache(maxsize=1)
def _end_weights() -> NDArray[np.float64]:
    """Gregory's corrections of the last six integers N-5..N, N itself not counted before.

    sum over x >= N of g(x) = integral from N + sum_j c_j (backward difference)^j g(N).
    """
    out = np.zeros(len(_GREGORY))
    for order, coefficient in enumerate(_GREGORY):
        for back in range(order + 1):
            out[back] += coefficient * (-1) ** back * comb(order, back)
    return out[::-1]


def _panels(start: float, reach: Reach, first: float) -> NDArray[np.float64]:
    """Edges from `start` on: widths doubling from `first` to the widest allowed, to the end of the reach."""
    widths = [first]
    fine = min(reach.fine, _WIDEST)
    while widths[-1] * 2 < fine:
        widths.append(widths[-1] * 2)
    edge = start + np.cumsum([0.0, *widths])
    wide = max(_WIDEST, (reach.stop - edge[-1]) / _MOST_PANELS)
    for end, width in ((reach.inner, max(fine, (reach.inner - start) / _MOST_PANELS)), (reach.stop, wide)):
        if end > edge[-1]:
            edge = np.append(edge, np.linspace(edge[-1], end, ceil((end - edge[-1]) / width) + 1)[1:])
    return edge


def continuous_nodes(start: float, reach: Reach, first: float) -> Nodes:
    """Points for an integral over y from `start` to the end of the reach (Gauss-Legendre, 16 points a panel).

    first  width of the first panel: below the scale on which the law changes at `start`
    """
    edge = _panels(start, reach, first)
    points, weights = _legendre(_ORDER)
    widths = np.diff(edge)
    y = edge[:-1, None] + widths[:, None] * points
    return Nodes(y.ravel(), np.log(widths[:, None] * weights).ravel())


def whole_nodes(lowest: float, xmin: float, reach: Reach, first: float) -> Nodes:
    """Points for a sum over the integers >= `lowest`: 512 one by one, then the integral with Gregory's end weights.

    The relative error is below 1e-10 for laws whose log density changes by less than .1 from one integer
    to the next after those 512, or has by then fallen by e^-23.
    """
    if lowest >= _ALL_SMOOTH:
        return continuous_nodes(log((lowest - 0.5) / xmin), reach, first)
    integers = np.arange(lowest, lowest + _SUMMED + 1)
    weight = np.ones(len(integers))
    weight[-1] = 0.0
    weight[-len(_GREGORY) :] += _end_weights()
    y = np.log(integers / xmin)
    rest = continuous_nodes(float(y[-1]), reach, first)
    log_weight = np.log(weight) - y - log(xmin)
    return Nodes(np.concatenate([y, rest.y]), np.concatenate([log_weight, rest.log_weight]))


def support(counting: Counting, xmin: float, reach: Reach, *, start: float = 0.0, first: float = 1.0) -> Nodes:
    """Points of a whole law: sizes >= xmin exp(start), or the integers from there on."""
    if counting == "whole":
        # Rounded before the ceiling: xmin exp(ln(x / xmin)) may miss the integer x by its last bit.
        lowest = xmin * float(np.exp(start))
        return whole_nodes(float(np.ceil(lowest * (1 - 4e-16 * (1 + abs(start))))), xmin, reach, first)
    return continuous_nodes(start, reach, first)


def tail_data(sample: Sample, xmin: float, counting: Counting, start_cell: int | None) -> TailData:
    """The events at or above xmin, as groups of points.

    start_cell  the cell xmin is the lower edge of, on the grid; None for exact sizes
    """
    if sample.cells is None or start_cell is None:
        first = int(np.searchsorted(sample.sizes, xmin, side="left"))
        sizes = sample.sizes[first:]
        y = np.log(sizes) - log(xmin)
        return TailData(Nodes(y, np.zeros(len(y))), None, sample.counts[first:].astype(np.float64), xmin)
    first = int(np.searchsorted(sample.cells, start_cell, side="left"))
    cells, counts = sample.cells[first:], sample.counts[first:].astype(np.float64)
    if counting == "whole":
        return _whole_cells(cells, counts, xmin)
    points, weights = _legendre(3)
    y = ((cells - start_cell)[:, None] + points) * CELL_WIDTH
    log_weight = np.broadcast_to(np.log(weights * CELL_WIDTH), y.shape)
    return TailData(Nodes(y.ravel(), log_weight.ravel()), np.arange(len(cells)) * 3, counts, xmin)


def _whole_cells(cells: NDArray[np.int64], counts: NDArray[np.float64], xmin: float) -> TailData:
    """Cells of whole sizes: up to 8 integers one by one, more as an integral from half a unit below to half above."""
    lowest = np.maximum(np.ceil(edges(cells)), np.ceil(xmin))
    highest = np.ceil(edges(cells + 1)) - 1
    points, weights = _legendre(3)
    ys, log_weights, lengths = [], [], []
    for low, high in zip(lowest, highest, strict=True):
        if high - low < 8:
            y = np.log(np.arange(low, max(low, high) + 1) / xmin)
            log_weight = -y - log(xmin)
        else:
            bottom, top = log((low - 0.5) / xmin), log((high + 0.5) / xmin)
            y = bottom + (top - bottom) * points
            log_weight = np.log((top - bottom) * weights)
        ys.append(y)
        log_weights.append(log_weight)
        lengths.append(len(y))
    starts = np.concatenate([[0], np.cumsum(lengths)[:-1]]).astype(np.int64)
    return TailData(Nodes(np.concatenate(ys), np.concatenate(log_weights)), starts, counts, xmin)


def reach_of(data: TailData, slope: float) -> Reach:
    """How far to integrate for laws fitted to `data` whose power law falls as exp(-slope y).

    At 45 / slope a power law holds e^-45 of its events; a peaked law is as narrow as the data are.
    """
    y = data.middles()
    mean = summed(data.counts, y) / data.n
    spread = sqrt(summed(data.counts, (y - mean) ** 2) / data.n)
    furthest = float(y[-1])
    inner = furthest + 4 * spread
    return Reach(max(45 / slope, furthest + 6.0), inner, max(min(_WIDEST, 2 * spread, 4 / slope), 1e-9))
