"""Minimum-KS fits written from the papers in plain numpy and scipy: slow, short, sharing nothing with the kernels.

Clauset, Shalizi & Newman, SIAM Review 51 (2009) 661-703: exponent eq. 3.1 (continuous) and B.8 (discrete), lower end
eq. 3.9 with the supremum taken over the whole line. Grid: Virkar & Clauset, Annals of Applied Statistics 8 (2014) 89.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.optimize import minimize_scalar
from scipy.special import zeta


@dataclass(frozen=True)
class Plain:
    alpha: float
    xmin: float
    distance: float
    n_tail: int


def _candidates(values, counts, min_tail):
    """(index, tail's values, tail's counts) of every candidate: enough events, and a larger value beyond."""
    for i in range(len(values) - 1):
        if counts[i:].sum() >= min_tail:
            yield i, values[i:], counts[i:]


def measured(sizes, counts, min_tail):
    """Continuous power law."""
    best = None
    for _, x, w in _candidates(np.asarray(sizes, float), np.asarray(counts), min_tail):
        n = w.sum()
        alpha = 1.0 + n / np.sum(w * np.log(x / x[0]))
        survival = (x / x[0]) ** (1.0 - alpha)
        before = np.cumsum(w[::-1])[::-1] / n
        distance = max(np.max(before - survival), np.max(survival - (before - w / n)))
        if best is None or distance < best.distance:
            best = Plain(alpha, x[0], distance, int(n))
    return best


def whole(sizes, counts, min_tail):
    """Discrete power law, by direct maximisation of the likelihood."""
    best = None
    for _, x, w in _candidates(np.asarray(sizes, float), np.asarray(counts), min_tail):
        n, logs = w.sum(), np.sum(w * np.log(x / x[0]))
        low = x[0]

        def loss(alpha, n=n, logs=logs, low=low):
            return n * (np.log(zeta(alpha, low)) + alpha * np.log(low)) + alpha * logs

        guess = 1.0 + n / (logs + n * np.log(low / (low - 0.5)))
        alpha = minimize_scalar(
            loss, bounds=(1.0 + (guess - 1.0) / 4, 1.0 + 4 * (guess - 1.0)), method="bounded", options={"xatol": 1e-11}
        ).x
        before = np.cumsum(w[::-1])[::-1] / n
        at, beyond = zeta(alpha, x) / zeta(alpha, low), zeta(alpha, x + 1) / zeta(alpha, low)
        distance = max(np.max(np.abs(before - at)), np.max(np.abs(before - w / n - beyond)))
        if best is None or distance < best.distance:
            best = Plain(alpha, low, distance, int(n))
    return best


def binned(cells, counts, min_tail, width):
    """Power law in bins equally wide in ln(size); xmin is a cell's number."""
    best = None
    for _, k, w in _candidates(np.asarray(cells, float), np.asarray(counts), min_tail):
        n = w.sum()
        rate = np.log(1.0 + n / np.sum(w * (k - k[0])))
        every = np.arange(k[0], k[-1] + 2)  # all edges, those of empty cells too
        above = np.array([w[k >= edge].sum() for edge in every]) / n
        distance = np.max(np.abs(above - np.exp(-rate * (every - k[0]))))
        if best is None or distance < best.distance:
            best = Plain(1.0 + rate / width, k[0], distance, int(n))
    return best


def whole_cells_alpha(lowest, beyond, counts):
    """Exponent of highest likelihood of whole sizes counted in cells lowest..beyond-1, by direct maximisation."""

    def loss(alpha):
        shares = zeta(alpha, lowest) - zeta(alpha, beyond)
        return -np.sum(counts * np.log(shares)) + counts.sum() * np.log(zeta(alpha, lowest[0]))

    return minimize_scalar(loss, bounds=(1.01, 8.0), method="bounded", options={"xatol": 1e-12}).x
