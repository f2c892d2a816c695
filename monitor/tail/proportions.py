"""Two shares against one another."""

from __future__ import annotations

import numpy as np
from scipy.special import chdtrc, gammaln, xlogy

_EXACT_UP_TO = 2000


def two_shares_p(first: int, of_first: int, second: int, of_second: int) -> float | None:
    """The two-sided p of "both shares are equal", for `first` of `of_first` and `second` of `of_second`.

    Up to 2000 events in all that count, Fisher's exact test (all tables no more likely than this one; Fisher,
    Statistical Methods for Research Workers, section 21.02); above, the likelihood ratio, chi-square with 1 degree
    of freedom. None when a side is empty.
    """
    if of_first == 0 or of_second == 0:
        return None
    total, size = first + second, of_first + of_second
    if total in (0, size):
        return 1.0
    if total <= _EXACT_UP_TO:
        return _fisher(first, of_first, total, of_second)
    observed = np.array([first, of_first - first, second, of_second - second], float)
    pooled = total / size
    expected = np.array([of_first * pooled, of_first * (1 - pooled), of_second * pooled, of_second * (1 - pooled)])
    return float(chdtrc(1.0, max(2 * float(np.sum(xlogy(observed, observed / expected))), 0.0)))


def _fisher(first: int, of_first: int, total: int, of_second: int) -> float:
    counts = np.arange(max(0, total - of_second), min(total, of_first) + 1, dtype=float)
    log_ways = (
        -gammaln(counts + 1)
        - gammaln(of_first - counts + 1)
        - gammaln(total - counts + 1)
        - gammaln(of_second - total + counts + 1)
    )
    ways = np.exp(log_ways - log_ways.max())
    own = ways[int(first - counts[0])]
    # Tables that tie with the observed one but for rounding belong to it.
    return float(min(1.0, ways[ways <= own * (1 + 1e-7)].sum() / ways.sum()))
