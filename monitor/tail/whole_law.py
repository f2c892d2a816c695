"""The zeta law of whole sizes, P(x) = x^-alpha / zeta(alpha, xmin), for many parameters at once.

Only what levels need: the logarithm of Hurwitz's zeta, also where the function itself under- or overflows, and
the quantile.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray
from scipy.special import zeta

Floats = NDArray[np.float64]

_EXACT_INTEGERS = 2.0**53
_LEAST = 1e-300
_STEEP_TERMS = np.arange(2200.0)  # the last is exp(-44) of the first at most


def log_zeta(alpha: Floats, q: Floats) -> Floats:
    """ln zeta(alpha, q), float64, broadcast; alpha > 1, q > 0.

    Euler and Maclaurin's series where q is large beside alpha (relative error of zeta below 1e-13), else scipy's zeta.
    """
    alpha, q = np.broadcast_arrays(np.asarray(alpha, np.float64), np.asarray(q, np.float64))
    far = q > np.maximum(100.0, 50 * alpha)
    safe = np.where(far, np.minimum(q, 1e60), 1e6)  # beyond, the corrections are nothing and their squares overflow
    a = np.where(far, alpha, 2.0)
    first = (a - 1) / (2 * safe)
    second = (a - 1) * a / (12 * safe**2)
    fourth = (a - 1) * a * (a + 1) * (a + 2) / (720 * safe**4)
    sixth = fourth * (a + 3) * (a + 4) / (42 * safe**2)
    series = (1 - a) * np.log(np.where(far, q, 1e6)) - np.log(a - 1) + np.log1p(first + second - fourth + sixth)
    value = zeta(np.where(far, 2.0, alpha), np.where(far, 1.0, q))
    out: Floats = np.where(far, series, np.log(np.maximum(value, _LEAST)))
    if np.any(value <= _LEAST):
        tiny = value <= _LEAST
        out[tiny] = _log_zeta_steep(alpha[tiny], q[tiny])
    return out


def _log_zeta_steep(alpha: Floats, q: Floats) -> Floats:
    """ln zeta(alpha, q) where zeta is no double, float64 (r,), for q <= 50 alpha: term by term beside the first."""
    terms = -alpha[:, None] * np.log1p(_STEEP_TERMS / q[:, None])
    return np.asarray(np.log(np.sum(np.exp(terms), axis=1)) - alpha * np.log(q), np.float64)


def whole_quantile(alpha: Floats, xmin: Floats, log_survival: Floats) -> Floats:
    """The smallest integer x with P(X > x | X >= xmin) <= exp(log_survival), float64, broadcast.

    log_survival <= 0. Beyond 2^53, where doubles skip integers, the answer is right to the last digit.
    """
    alpha, xmin, log_survival = np.broadcast_arrays(
        np.asarray(alpha, np.float64), np.asarray(xmin, np.float64), np.asarray(log_survival, np.float64)
    )
    target = log_zeta(alpha, xmin) + log_survival
    target = target + 4e-15 * (1 + np.abs(target))
    log_q = np.log(xmin) - log_survival / (alpha - 1)
    for _ in range(8):  # Newton on ln zeta against ln q, nearly a straight line
        q = np.exp(np.minimum(log_q, 650.0))
        here = log_zeta(alpha, q)
        slope = -alpha * np.exp(log_zeta(alpha + 1, q) - here + np.minimum(log_q, 650.0))
        log_q = np.maximum(log_q - (here - target) / slope, np.log(xmin))
    q = np.exp(np.minimum(log_q, 709.0))
    x = np.maximum(np.ceil(q) - 1, xmin - 1)
    exact = x < _EXACT_INTEGERS
    # The ceiling decides wrongly when q is an integer but for its last digits: ask the law itself.
    above = np.where(exact & (x > xmin - 1), x, xmin)
    lower_is_enough = exact & (x > xmin - 1) & (log_zeta(alpha, above) <= target)
    x = np.where(lower_is_enough, x - 1, x)
    too_low = exact & (log_zeta(alpha, x + 1) > target)
    out: Floats = np.where(too_low, x + 1, x)
    return out
