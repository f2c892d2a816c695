"""Measured sizes on the grid (Y. Virkar & A. Clauset, Annals of Applied Statistics 8 (2014) 89-119)."""

from __future__ import annotations

from collections.abc import Callable
from math import expm1, log, sqrt

import numpy as np

from monitor.tail.kernels.drawing import settle
from monitor.tail.kernels.ladder import BINNED, Ladder
from monitor.tail.kernels.replicating import Steps
from monitor.tail.kernels.splitting import fill_geometric, tree_of
from monitor.tail.laws.law import NO_STEPS, NOTHING, Floats, Law, Rungs
from monitor.tail.tail_fit import TailFit
from storage.grid import CELL_WIDTH, HIGHEST_CELL, LOWEST_CELL, cell_of, edges

# Cells that hold fewer events than this are drawn event by event.
_CROWDED = 4.0


class Binned(Law):
    """Rows are the occupied cells of the grid; candidates for xmin are their lower edges."""

    rate_unit = 1.0 / CELL_WIDTH

    def climb(self, start: int, xmin: float | None) -> Rungs:
        """Rows of the cells from index `start` on; with `xmin`, the lowest row is its cell, if need be empty."""
        assert self.sample.cells is not None
        cells, counts = self.sample.cells[start:], self.sample.counts[start:]
        if xmin is not None and (cell := int(cell_of(np.array([xmin]))[0])) != cells[:1]:
            cells, counts = np.append(cell, cells), np.append(0, counts)
        events = np.append(counts, 0).astype(np.float64)
        ladder = Ladder(BINNED, cells.astype(np.float64), NOTHING, events, np.zeros(cells.size), NOTHING)
        settle(ladder, 0, cells.size)
        return Rungs(ladder, None, edges(cells))

    def given(self, xmin: float) -> tuple[int, float]:
        """For a given xmin: the index of the first cell in the tail, and the lower edge of the cell xmin lies in."""
        assert self.sample.cells is not None
        cell = cell_of(np.array([xmin]))
        return int(np.searchsorted(self.sample.cells, cell[0])), float(edges(cell)[0])

    def sizes_at(self, places: Floats) -> Floats:
        """Lower edges of cells."""
        return edges(np.clip(places, LOWEST_CELL, HIGHEST_CELL).astype(np.int64))

    def standard_error(self, alpha: float, ladder: Ladder, row: int) -> float:
        """By the geometric law of cells: (1 - r)/(width sqrt(n r)), r = exp(-(alpha - 1) width)."""
        slope = (alpha - 1.0) * CELL_WIDTH
        return -expm1(-slope) / (CELL_WIDTH * sqrt(ladder.events[row] * np.exp(-slope)))

    def log_likelihood(self, ladder: Ladder, row: int) -> Callable[[float], float]:
        """Log-likelihood of the exponent at a row, up to a constant."""
        n, spread = float(ladder.events[row]), float(ladder.spread[row])
        return lambda alpha: n * log(-expm1(-(alpha - 1.0) * CELL_WIDTH)) - (alpha - 1.0) * CELL_WIDTH * spread

    def steps(self, fit: TailFit) -> Steps:
        """A tree over the cells that hold some events each."""
        rate = (fit.alpha - 1.0) * CELL_WIDTH
        crowd = fit.n_tail * -expm1(-rate) / _CROWDED
        if crowd < 2.0:
            return NO_STEPS
        cells = max(int(log(crowd) / rate), 1)
        chances = np.empty(cells + 1)
        fill_geometric(rate, chances)
        return Steps(NOTHING, tree_of(chances), cells, NOTHING, NOTHING, NOTHING, NOTHING)

    def most_rows(self, fit: TailFit, events: int) -> int:
        """Rows that a tail of so many events may fill: a cell beyond has a chance of exp(-45)."""
        return min(events, int((log(events) + 45.0) / ((fit.alpha - 1.0) * CELL_WIDTH)) + 64)
