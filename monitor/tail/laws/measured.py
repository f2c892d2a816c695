"""Measured sizes under the continuous power law (Clauset, Shalizi & Newman 2009, section 3.1)."""

from __future__ import annotations

from collections.abc import Callable
from math import log, sqrt

import numpy as np

from monitor.tail.kernels.ladder import MEASURED, Ladder
from monitor.tail.kernels.measured import build
from monitor.tail.laws.law import NOTHING, Floats, Law, Rungs
from monitor.tail.tail_fit import TailFit


class Measured(Law):
    """Rows are distinct values of ln(size)."""

    def climb(self, start: int, xmin: float | None) -> Rungs:
        """Rows of the sizes from index `start` on; with `xmin`, the lowest row is there, if need be without events."""
        sizes, counts = self.sample.sizes[start:], self.sample.counts[start:]
        if xmin is not None:
            sizes, counts = np.concatenate(([xmin], sizes)), np.concatenate(([0], counts))
        k = sizes.size
        y, events, spread = np.empty(k), np.empty(k + 1), np.empty(k)
        if build(sizes, counts, y, events, spread):
            return Rungs(Ladder(MEASURED, y, NOTHING, events, spread, NOTHING), None, sizes)
        # Rare: sizes so close that they share a logarithm. They become one row, told as the smallest of them.
        y, first = np.unique(y, return_index=True)
        merged = sizes[first]
        counts = np.add.reduceat(counts, first)
        build(merged, counts, y, events[: y.size + 1], spread[: y.size])
        ladder = Ladder(MEASURED, y, NOTHING, events[: y.size + 1].copy(), spread[: y.size].copy(), NOTHING)
        return Rungs(ladder, first, merged)

    def given(self, xmin: float) -> tuple[int, float]:
        """For a given xmin: the index of the first size in the tail, and xmin itself."""
        return int(np.searchsorted(self.sample.sizes, xmin)), xmin

    def sizes_at(self, places: Floats) -> Floats:
        """The sizes that places of the ladder stand for."""
        return np.exp(np.minimum(places, 709.0))

    def standard_error(self, alpha: float, ladder: Ladder, row: int) -> float:
        """(alpha - 1)/sqrt(n): Clauset, Shalizi & Newman, eq. 3.2."""
        return (alpha - 1.0) / sqrt(ladder.events[row])

    def log_likelihood(self, ladder: Ladder, row: int) -> Callable[[float], float]:
        """Log-likelihood of the exponent at a row, up to a constant."""
        n, spread = float(ladder.events[row]), float(ladder.spread[row])
        return lambda alpha: n * log(alpha - 1.0) - (alpha - 1.0) * spread

    def most_rows(self, fit: TailFit, events: int) -> int:
        """Rows that a tail of so many events may fill: hardly two are equal."""
        return events
