"""Self-starting scores: exactly standard exponential whatever the unknown rate, so that no baseline error remains.

If y_1, y_2, ... are independent exponential with one unknown mean and S_n is the sum of the first n, then
z_{n+1} = n ln(1 + y_{n+1} / S_n) are independent standard exponential: y_{n+1}/S_n has the survival function
(1 + r)^-n, and it is independent of the earlier ratios because those do not depend on the scale, of which S_n is the
complete sufficient statistic (D. Basu, Sankhya 15 (1955)). The idea of scoring each value by its own past:
D. M. Hawkins, The Statistician 36 (1987), "Self-starting CUSUM charts for location and scale". A rule that plugs in
an estimated mean instead loses most of its promised run length in the unlucky baselines.
"""

from __future__ import annotations

import msgspec
import numpy as np
from numpy.typing import NDArray

_LEAST = 1e-290
"""Sums up to this are no past to compare with: a ratio to them could leave the doubles. Log sizes lie far above."""


class Past(msgspec.Struct, frozen=True):
    """What scores compare with: n values and their sum. `known`: the mean total / n is given, not estimated."""

    n: float = 0.0
    total: float = 0.0
    known: bool = False

    def with_more(self, n: int, total: float) -> Past:
        """The past with n more values of this sum; a known mean stays as it is."""
        return self if self.known else Past(self.n + n, self.total + total)

    @property
    def usable(self) -> bool:
        """Whether there is anything to compare with."""
        return self.n > 0 and self.total > 0


class Scored(msgspec.Struct, frozen=True):
    """scores float64 (m,); counted bool (m,): False where there was no past yet; past: after them all."""

    scores: NDArray[np.float64]
    counted: NDArray[np.bool_]
    past: Past


def self_starting(values: NDArray[np.float64], past: Past, hold: bool = False) -> Scored:
    """Scores of values >= 0 in order, each against everything before it.

    hold: compare with `past` alone and learn nothing (an alarm stands, the values are under suspicion).
    """
    if not values.size:
        return Scored(values, np.empty(0, bool), past)
    if past.known or hold:
        n = np.full(values.size, past.n)
        before = np.full(values.size, past.total)
    else:
        n = past.n + np.arange(values.size)
        # cumsum adds one after another: the sum is the same however a slot is cut into calls.
        running = np.cumsum(np.concatenate(([past.total], values)))
        before = running[:-1]
    counted = (n > 0) & (before > _LEAST)
    ratio = np.divide(values, before, out=np.zeros_like(values), where=counted)
    scores = n * ratio if past.known else n * np.log1p(ratio)
    after = past if past.known or hold else Past(past.n + values.size, float(running[-1]))
    return Scored(scores, counted, after)
