"""When a bootstrap may stop: sequential intervals for the chance p behind a count of successes.

After m replicates of which b were at least as far, the mixture of binomial likelihoods over a Beta(u, v) prior
divided by the likelihood at p is a martingale of mean 1 if p is the true chance, so by Ville's inequality it ever
passes 1/risk with chance at most `risk`. The p at which it does not are therefore an interval valid at every m at
once, whenever one stops and for whatever reason (H. Robbins, Annals of Mathematical Statistics 41 (1970) 1397;
for Monte Carlo tests A. Gandy, Journal of the American Statistical Association 104 (2009) 1504).
The fixed-m interval of Clopper and Pearson has no such property.
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import brentq
from scipy.special import betaln

RESAMPLING_RISK = 1e-3
"""Chance that an early stop puts p on the wrong side of the threshold."""

FLOOR = 200
"""Replicates before which a bootstrap does not stop."""


def log_mixture(successes: NDArray[np.int64], m: NDArray[np.int64], threshold: float) -> NDArray[np.float64]:
    """ln of the mixture martingale against p = threshold, after m replicates with so many successes.

    The prior is Beta(1, (1 - threshold) / threshold), of mean `threshold`: most of its weight lies where the
    question is hard.
    """
    u, v = 1.0, (1.0 - threshold) / threshold
    mixed: NDArray[np.float64] = betaln(u + successes, v + m - successes) - betaln(u, v)
    mixed -= successes * np.log(threshold) + (m - successes) * np.log1p(-threshold)
    return mixed


def first_decision(verdicts: NDArray[np.bool_], threshold: float, *, risk: float = RESAMPLING_RISK) -> int | None:
    """The number of replicates after which p is known to lie on one side of `threshold`, or None.

    Parameters: verdicts, bool (m,), in the order of the replicates: at least as far as the data?
    It is the first m >= FLOOR at which the martingale is above 1/risk; a threshold of 0 or 1 decides at once.
    """
    m = np.arange(1, verdicts.size + 1)
    if threshold <= 0.0 or threshold >= 1.0:
        decided = m >= FLOOR
    else:
        decided = (log_mixture(np.cumsum(verdicts), m, threshold) > -np.log(risk)) & (m >= FLOOR)
    return int(np.argmax(decided)) + 1 if decided.any() else None


def interval_at_any_stop(successes: int, m: int, *, level: float = 0.95) -> tuple[float, float]:
    """Interval of p that holds at whatever m one stopped: {p : (m + 1) Bin(successes; m, p) > 1 - level}.

    This is the mixture over a uniform prior, solved for p. Returns (low, high) within [0, 1].
    """
    if m == 0:
        return 0.0, 1.0
    constant = -betaln(successes + 1.0, m - successes + 1.0) - np.log1p(-level)

    def excess(p: float) -> float:
        gain = 0.0
        if successes:
            gain += successes * np.log(p)
        if m - successes:
            gain += (m - successes) * np.log1p(-p)
        return float(constant + gain)

    peak = successes / m
    low = 0.0 if successes == 0 else _crossing(excess, 1e-300, peak)
    high = 1.0 if successes == m else _crossing(excess, peak, 1.0 - 1e-16)
    return low, high


def _crossing(function: Callable[[float], float], low: float, high: float) -> float:
    return float(brentq(function, low, high, xtol=1e-12))
