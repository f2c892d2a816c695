"""The power law itself: density, survival, quantile and likelihood, for measured and for whole sizes.

alpha is always the exponent of the density, p(x) ~ x^-alpha for x >= xmin; the survival function P(X >= x) then falls
with alpha - 1. Some fields report alpha - 1 ("tail index") or 1/(alpha - 1) ("shape"): this is the one place where
that is said, everywhere else alpha means this.

Measured: Clauset, Shalizi & Newman, SIAM Review 51 (2009) 661, eqs. 2.2 and 2.6. Whole: eqs. 2.4 and 2.7, with
Hurwitz's zeta function.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.tail.judgement import Counting
from monitor.tail.whole_law import log_zeta, whole_quantile

Floats = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class PowerLaw:
    """A power law above xmin.

    alpha     exponent of the density, > 1
    xmin      lower end, > 0; a whole number for whole sizes
    counting  'measured' (continuous) or 'whole' (zeta law)
    """

    alpha: float
    xmin: float
    counting: Counting = "measured"

    def pdf(self, sizes: Floats) -> Floats:
        """Density at `sizes` (of whole sizes: probability), float64 (n,); 0 below xmin, and between whole numbers."""
        sizes = np.asarray(sizes, np.float64)
        inside = sizes >= self.xmin
        if self.counting == "whole":
            inside &= sizes == np.floor(sizes)
        x = np.where(inside, sizes, self.xmin)
        return np.where(inside, np.exp(self.log_pdf(x)), 0.0)

    def log_pdf(self, sizes: Floats) -> Floats:
        """ln of the density at sizes >= xmin (whole sizes: of the probability), float64 (n,)."""
        sizes = np.asarray(sizes, np.float64)
        if self.counting == "whole":
            return np.asarray(-self.alpha * np.log(sizes) - log_zeta(*self._parameters()))
        scale = np.log((self.alpha - 1.0) / self.xmin)
        return np.asarray(scale - self.alpha * (np.log(sizes) - np.log(self.xmin)))

    def sf(self, sizes: Floats) -> Floats:
        """P(X >= size), float64 (n,); 1 up to xmin."""
        x = np.maximum(np.asarray(sizes, np.float64), self.xmin)
        if self.counting == "whole":
            alpha, xmin = self._parameters()
            return np.asarray(np.exp(log_zeta(alpha, np.ceil(x)) - log_zeta(alpha, xmin)))
        return np.asarray(np.exp((1.0 - self.alpha) * (np.log(x) - np.log(self.xmin))))

    def isf(self, chances: Floats) -> Floats:
        """The size passed with the given chances, float64 (n,), 0 < chance <= 1.

        Measured: P(X >= size) = chance. Whole: the smallest size with P(X > size) <= chance. Infinite beyond doubles.
        """
        logs = np.log(np.asarray(chances, np.float64))
        if self.counting == "whole":
            return np.asarray(whole_quantile(*self._parameters(), logs))
        with np.errstate(over="ignore"):
            return np.asarray(np.exp(np.log(self.xmin) - logs / (self.alpha - 1.0)))

    def _parameters(self) -> tuple[Floats, Floats]:
        return np.asarray(self.alpha, np.float64), np.asarray(self.xmin, np.float64)
