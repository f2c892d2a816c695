"""Intervals of the fitted numbers, at a given lower end and with its choice included."""

from __future__ import annotations

from collections.abc import Callable
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.stats import chi2

from monitor.tail.judgement import Interval
from monitor.tail.tail_fit import TailFit

if TYPE_CHECKING:
    from monitor.tail.laws.law import Law

# Fewer draws have no order statistics for 95 %.
_FEWEST_DRAWS = 40


def alpha_exact(alpha: float, n_tail: int, *, level: float = 0.95) -> Interval:
    """Exact interval of the exponent of measured sizes at a lower end that was not chosen from the data.

    2 n (alpha - 1)/(alpha_hat - 1) follows chi-square with 2n degrees of freedom, since the logarithms above xmin
    are exponential (A. N. Muniruzzaman, Bulletin of the Calcutta Statistical Association 7 (1957) 115).
    """
    low, high = chi2.ppf(((1.0 - level) / 2.0, (1.0 + level) / 2.0), 2 * n_tail)
    scale = (alpha - 1.0) / (2.0 * n_tail)
    return 1.0 + float(low) * scale, 1.0 + float(high) * scale


def alpha_by_likelihood(profile: Callable[[float], float], alpha: float, *, level: float = 0.95) -> Interval:
    """Exponents whose log-likelihood is within chi2_1(level)/2 of the largest (Wilks)."""
    floor = profile(alpha) - float(chi2.ppf(level, 1)) / 2.0

    def excess(value: float) -> float:
        return profile(value) - floor

    return _outward(excess, alpha, 0.5), _outward(excess, alpha, 2.0)


def _outward(excess: Callable[[float], float], alpha: float, factor: float) -> float:
    """Where `excess` falls to 0, going out from alpha by factors in alpha - 1."""
    inside = alpha - 1.0
    for _ in range(60):
        outside = inside * factor
        if excess(1.0 + outside) < 0.0:
            low, high = min(inside, outside), max(inside, outside)
            return 1.0 + float(brentq(lambda rate: excess(1.0 + rate), low, high, xtol=1e-12, rtol=1e-12))
        inside = outside
    return 1.0 + inside


def alpha_at_given_xmin(fit: TailFit, law: Law) -> Interval:
    """95 % interval of the exponent, taking xmin as given: exact for measured sizes, else by likelihood."""
    if fit.counting == "measured" and fit.start_cell is None:
        return alpha_exact(fit.alpha, fit.n_tail)
    return alpha_by_likelihood(law.profile(fit), fit.alpha)


def of_draws(values: NDArray[np.float64] | NDArray[np.int64], *, level: float = 0.95) -> Interval:
    """Central interval from order statistics: the k-th smallest and k-th largest of r draws, k = (1-level)/2 (r+1).

    Of 400 draws the 10th and the 391st. (None, None) when there are too few draws for it.
    """
    r = values.size
    if r < _FEWEST_DRAWS:
        return None, None
    k = int((1.0 - level) / 2.0 * (r + 1))
    ordered = np.sort(values)
    return float(ordered[k - 1]), float(ordered[r - k])
