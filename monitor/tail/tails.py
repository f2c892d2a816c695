"""Power-law tails, one or hundreds at once: quantiles and chances of one fit and of its bootstrap replicates."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.tail.judgement import Counting, Interval
from monitor.tail.tail_fit import Draws, TailFit
from monitor.tail.whole_law import log_zeta, whole_quantile

Floats = NDArray[np.float64]

_LARGEST_LOG = 709.0
"""exp of more is beyond doubles: such a size is reported as unknowable."""
_EXACT_INTEGERS = 2.0**53


@dataclass(frozen=True, slots=True)
class Tails:
    """Tails of r fits: alpha, xmin and share (of all events, in the tail), float64 (r,) each."""

    alpha: Floats
    xmin: Floats
    share: Floats
    counting: Counting

    @classmethod
    def of_fit(cls, fit: TailFit) -> Tails:
        """The one tail of a fit."""
        return cls(np.array([fit.alpha]), np.array([fit.xmin]), np.array([fit.share]), fit.counting)

    @classmethod
    def of_draws(cls, draws: Draws, counting: Counting) -> Tails:
        """The tails of a fit's replicates."""
        return cls(draws.alpha, draws.xmin, draws.n_tail / draws.n, counting)

    def log_size(self, chance: float) -> Floats:
        """ln of the size that an event passes with probability `chance`, float64 (r,).

        NaN where that size lies below xmin (chance > share), about which the tail says nothing.
        ln x = ln xmin + ln(share / chance) / (alpha - 1); whole sizes: the smallest integer x with
        P(X > x) <= chance.
        """
        known = self.share >= chance * (1 - 1e-12)
        log_survival = np.minimum(np.log(chance) - np.log(np.where(known, self.share, 1.0)), 0.0)
        if self.counting == "whole":
            sizes = whole_quantile(self.alpha, np.ceil(self.xmin), log_survival)
            log_size = np.log(np.maximum(sizes, 1e-300))
        else:
            log_size = np.log(self.xmin) - log_survival / (self.alpha - 1)
        return np.where(known, log_size, np.nan)

    def chance(self, size: float) -> Floats:
        """Probability that an event passes `size` (strictly), float64 (r,); NaN where size < xmin."""
        known = self.xmin <= size
        if self.counting == "whole":
            first = np.ceil(self.xmin)  # on the grid xmin is the edge of a cell
            lowest = np.where(known, np.floor(size) + 1, first)
            log_survival = log_zeta(self.alpha, lowest) - log_zeta(self.alpha, first)
        else:
            log_survival = (self.alpha - 1) * np.minimum(np.log(self.xmin) - np.log(size), 0.0)
        return np.where(known, self.share * np.exp(log_survival), np.nan)

    def at_or_above(self, size: float) -> Floats:
        """Probability that an event is at or above `size`, float64 (r,); NaN where size < xmin.

        For whole sizes that is to pass the integer below `size`; for measured ones it is the same as to pass it.
        """
        below = float(np.ceil(size)) - 1 if self.counting == "whole" else size
        passed = np.where(self.xmin <= below, self.chance(below), self.share)
        return np.where(self.xmin <= size, passed, np.nan)


def size_of(log_size: float | None, counting: Counting) -> float | None:
    """exp of it, for whole sizes the integer it stands for; None when it is unknown or beyond doubles."""
    if log_size is None or not log_size < _LARGEST_LOG:
        return None
    size = float(np.exp(log_size))
    return float(round(size)) if counting == "whole" and size < _EXACT_INTEGERS else size


def order_limits(values: Floats, *, missing: Interval = (None, None)) -> Interval:
    """95 % limits of a quantity from its r replicates: the order statistics 10 and 391 of 400.

    For any r >= 39: those numbered floor((r + 1) / 40) from either end; fewer give (None, None). NaN marks a replicate
    that says nothing; when more than 1 in 40 do, the limits are widened to hold those in `missing`.
    """
    known = np.sort(values[~np.isnan(values)])
    rank = (len(known) + 1) // 40
    if rank == 0:
        return missing
    low, high = float(known[rank - 1]), float(known[-rank])
    if 40 * (len(values) - len(known)) <= len(values):
        return low, high
    lower = None if missing[0] is None else min(low, missing[0])
    upper = None if missing[1] is None else max(high, missing[1])
    return lower, upper
