"""The share of a tail's total held by its largest events."""

from __future__ import annotations

import numpy as np

from monitor.tail.judgement import Counting
from monitor.tail.whole_law import Floats, log_zeta, whole_quantile

_ALIKE = 1e6


def top_share_of(alpha: Floats, xmin: Floats, fraction: float, counting: Counting) -> Floats:
    """The share of the total held by the largest `fraction` of the tail's events, float64 (r,), in (fraction, 1).

    Parameters: alpha > 2 and xmin, float64 (r,). Measured sizes: W = P^((alpha - 2) / (alpha - 1)), Newman,
    Contemporary Physics 46 (2005) 323, equation 28. Whole sizes: the same by sums; of the events at the dividing
    integer, which all have one size, the part that completes the fraction is counted.
    """
    if counting == "measured":
        return np.asarray(fraction ** ((alpha - 2) / (alpha - 1)), np.float64)
    xmin = np.ceil(xmin)  # on the grid xmin is the edge of a cell
    dividing = whole_quantile(alpha, xmin, np.full(len(alpha), np.log(fraction)))
    # From there on the logarithms of zeta have lost their digits, but sizes are alike to within 1/alpha.
    plain = alpha < _ALIKE
    shares: Floats = np.full(len(alpha), fraction)
    alpha, xmin, dividing = alpha[plain], xmin[plain], dividing[plain]
    total = log_zeta(alpha - 1, xmin)
    above = np.exp(log_zeta(alpha, dividing + 1) - log_zeta(alpha, xmin))
    held = np.exp(log_zeta(alpha - 1, dividing + 1) - total)
    rest = (fraction - above) * np.exp(np.log(dividing) + log_zeta(alpha, xmin) - total)
    shares[plain] = held + rest
    return shares
