"""Whole sizes under the zeta law, exact or on the grid (Clauset, Shalizi & Newman 2009, section 3.1, appendix B)."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import lru_cache
from math import ceil, sqrt

import numpy as np
from numpy.typing import NDArray

from monitor.tail.kernels.drawing import settle
from monitor.tail.kernels.ladder import WHOLE, Ladder, new_scratch
from monitor.tail.kernels.replicating import Body, Steps
from monitor.tail.kernels.splitting import tree_of
from monitor.tail.kernels.whole import fill_survivals, log_normaliser, spread_of_logs
from monitor.tail.laws.law import NO_STEPS, NOTHING, Floats, Law, Rungs, body_of
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import TailFit
from storage.grid import CELLS_PER_DECADE, cell_of, edges

# Survivals of exact sizes kept in a table for the replicates; sizes beyond it are found one by one.
_TABLE = 4096

# Cells with fewer integers are summed over them, others integrated: the error is below 1e-8 of a cell's width.
_FEW_INTEGERS = 64


@dataclass(frozen=True, slots=True)
class _Rows:
    """What a row of whole sizes is, float64 (k,) each: lowest integer, lowest integer beyond, mean of ln(X/lowest)
    and variance of ln X in the row under the exponent 2."""

    place: Floats
    beyond: Floats
    offset: Floats
    variance: Floats

    def at(self, index: slice | NDArray[np.int64]) -> _Rows:
        return _Rows(self.place[index], self.beyond[index], self.offset[index], self.variance[index])


class Whole(Law):
    """Rows are distinct integers, or on the grid the cells that hold any."""

    def climb(self, start: int, xmin: float | None) -> Rungs:
        """Rows of the sizes from index `start` on; with `xmin`, the lowest row is there, if need be without events."""
        rows = _rows_of(self.sample).at(slice(start, None))
        counts = self.sample.counts[start:]
        if xmin is not None and not (counts.size and rows.place[0] == xmin):
            rows = _Rows(
                np.append(xmin, rows.place),
                np.append(xmin + 1.0, rows.beyond),
                np.append(0.0, rows.offset),
                np.append(0.0, rows.variance),
            )
            counts = np.append(0, counts)
        held = counts.astype(np.float64)
        ladder = Ladder(WHOLE, rows.place, rows.beyond, np.append(held, 0.0), held * rows.offset, held * rows.variance)
        settle(ladder, 0, counts.size)
        return Rungs(ladder, None, rows.place)

    def given(self, xmin: float) -> tuple[int, float]:
        """For a given xmin: the index of the first size in the tail, and the lowest integer in it."""
        if self.sample.cells is None:
            return int(np.searchsorted(self.sample.sizes, xmin)), float(ceil(xmin))
        cell = int(cell_of(np.array([float(ceil(xmin))]))[0])
        return int(np.searchsorted(self.sample.cells, cell)), float(_cells().place[cell])

    def sizes_at(self, places: Floats) -> Floats:
        """Whole sizes are their own places."""
        return places.copy()

    def standard_error(self, alpha: float, ladder: Ladder, row: int) -> float:
        """1/sqrt(n times the variance of ln X), less what the cells hide of it (appendix B, eq. B.19)."""
        n = float(ladder.events[row])
        information = float(spread_of_logs(alpha, ladder.place[row])) - float(ladder.within[row]) / n
        return 1.0 / sqrt(n * information) if information > 0.0 else float("inf")

    def log_likelihood(self, ladder: Ladder, row: int) -> Callable[[float], float]:
        """Log-likelihood of the exponent at a row, up to a constant; in cells by the expansion of kernels.whole."""
        n, start = float(ladder.events[row]), float(ladder.place[row])
        spread, within = float(ladder.spread[row]), float(ladder.within[row])

        scratch = new_scratch(1)

        def value(alpha: float) -> float:
            shift = alpha - 2.0
            return -n * float(log_normaliser(alpha, start, scratch)) - shift * spread + 0.5 * shift * shift * within

        return value

    def most_rows(self, fit: TailFit, events: int) -> int:
        """Rows that a tail of so many events may fill."""
        return events if self.sample.cells is None else min(events, _cells().place.size)

    def body(self, rows: int) -> Body:
        """The lowest rows of the ladder, to be drawn from."""
        table = _rows_of(self.sample).at(slice(0, rows))
        return body_of(
            table.place,
            self.sample.counts[:rows].astype(np.float64),
            beyond=table.beyond,
            offset=table.offset,
            variance=table.variance,
        )

    def steps(self, fit: TailFit) -> Steps:
        """Survivals of the fitted law, at every integer of a table or at every cell."""
        if self.sample.cells is None:
            values = fit.xmin + np.arange(_TABLE, dtype=np.float64)
            return NO_STEPS._replace(survival=_survivals(fit.alpha, fit.xmin, values))
        assert fit.start_cell is not None
        cells = _cells()
        filled = np.flatnonzero(cells.beyond > cells.place)
        rows = cells.at(filled[filled >= fit.start_cell])
        chances = -np.diff(_survivals(fit.alpha, fit.xmin, rows.place), append=0.0)  # the last cell takes all beyond
        tree = tree_of(np.maximum(chances, 0.0))
        return Steps(NOTHING, tree, rows.place.size, rows.place, rows.beyond, rows.offset, rows.variance)


def _survivals(alpha: float, xmin: float, values: Floats) -> Floats:
    """P(X >= v) of the zeta law from xmin on."""
    out = np.empty(values.size)
    fill_survivals(alpha, xmin, values, out, new_scratch(1))
    return out


def _rows_of(sample: Sample) -> _Rows:
    if sample.cells is not None:
        return _cells().at(np.clip(sample.cells, 0, None))
    nought = np.zeros(sample.sizes.size)
    return _Rows(sample.sizes, sample.sizes + 1.0, nought, nought)


@lru_cache(maxsize=1)
def _cells() -> _Rows:
    """The cells from 1 to 2^53, by their number; a cell without an integer has beyond == place."""
    last = int(np.log10(2.0**53) * CELLS_PER_DECADE)
    bounds = np.ceil(edges(np.arange(last + 2)))
    low, high = bounds[:-1], bounds[1:]
    offset, variance = np.zeros(low.size), np.zeros(low.size)
    for k in np.flatnonzero((high - low > 1) & (high - low < _FEW_INTEGERS)):
        logs = np.log(np.arange(low[k], high[k]) / low[k])
        weights = np.exp(-2.0 * logs)
        offset[k] = np.average(logs, weights=weights)
        variance[k] = np.average((logs - offset[k]) ** 2, weights=weights)
    wide = high - low >= _FEW_INTEGERS
    offset[wide], variance[wide] = _moments(np.log((low - 0.5) / low)[wide], np.log((high - 0.5) / low)[wide])
    return _Rows(low, high, offset, variance)


def _moments(bottom: Floats, top: Floats) -> tuple[Floats, Floats]:
    """Mean and variance of y with density exp(-y) between bottom and top, by their series in the width."""
    width = top - bottom
    mean = 0.5 * (bottom + top) - width**2 / 12.0 + width**4 / 720.0
    return mean, width**2 / 12.0 - width**4 / 240.0
