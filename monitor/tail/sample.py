"""What a fit is given: distinct sizes and how often each occurred."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from storage.grid import cell_of, edges


@dataclass(frozen=True, slots=True)
class Sample:
    """Sizes with counts, ascending. Every event is in here; nothing is sampled.

    sizes   float64 (k,), distinct, > 0, finite, ascending, in the stream's unit; on the grid the
            lower edges of the cells
    counts  int64 (k,), >= 1: events at each size
    cells   int64 (k,) when the sample is on the grid (storage.grid), else None
    """

    sizes: NDArray[np.float64]
    counts: NDArray[np.int64]
    cells: NDArray[np.int64] | None = None

    @property
    def n(self) -> int:
        """Number of events."""
        return int(self.counts.sum())

    @property
    def resolution(self) -> str:
        """'exact' or 'grid'."""
        return "exact" if self.cells is None else "grid"

    def on_grid(self) -> Sample:
        """The same events on the grid."""
        if self.cells is not None:
            return self
        cells = cell_of(self.sizes)
        first = np.flatnonzero(np.diff(cells, prepend=cells[0] - 1))
        return Sample.of_cells(cells[first], np.add.reduceat(self.counts, first))

    @classmethod
    def of_sizes(cls, sizes: NDArray[np.float64]) -> Sample:
        """Count raw sizes, float64 (n,) in any order, all > 0 and finite."""
        ordered = np.sort(np.asarray(sizes, np.float64))
        same = ordered[1:] == ordered[:-1]
        if not same.any():  # as with most measured sizes: nothing to count
            return cls(ordered, np.ones(ordered.size, np.int64))
        ends = np.append(np.flatnonzero(~same), ordered.size - 1)
        return cls(ordered[ends], np.diff(ends, prepend=-1))

    @classmethod
    def of_cells(cls, cells: NDArray[np.int64], counts: NDArray[np.int64]) -> Sample:
        """A sample on the grid: cells int64 (k,) ascending and distinct, counts int64 (k,) >= 1."""
        return cls(edges(cells), np.asarray(counts, np.int64), np.asarray(cells, np.int64))
