"""Exact run lengths of the exponential CUSUM: the yardstick that the promise table is held against.

Upwards S <- max(0, S + z - k), alarm at S > h; downwards S <- max(0, S + k - z). Scores z are exponential with mean
`mean`, S starts at 0 (E. S. Page, Biometrika 41 (1954); for exponential values S. Vardeman & D. Ray, Technometrics 27
(1985); F. Gan, Journal of Quality Technology 26 (1994)). With mu = 1/mean the mean run length L from s satisfies a
delay equation L'(s) = mu (L(s) - 1 - L(max(0, s - k))), whose Laplace transform is a geometric series, so that
L(0) is a finite sum: with f_j(x) = (-1)^(j+1) + e^(mu x) sum_{i<=j} (-1)^(j-i) (mu x)^i / i!,
up:   L = 1 + sum_{jk < h+k} (-1)^j f_j(h + k - jk)                                [h <= k: e^h (e^k - h + 1) - 1]
down: L = A a(h) + b(h), b(w) = -sum_{jk < w} (-1)^j f_j(w - jk), A = (1 + b(h-k) - b(h)) / (a(h) - a(h-k)),
      a(w) = e^(mu w) - e^(-mu k) sum_{jk < w} (-1)^j e^(mu (w-jk)) (mu (w-jk))^(j+1) / (j+1)!
The sums alternate and cancel, so they are taken in decimal arithmetic with as many digits as that costs.
The CUSUM that knows both exponents is the optimum for its delay (G. Lorden, Annals of Mathematical Statistics 42
(1971); G. Moustakides, Annals of Statistics 14 (1986)).
"""

from __future__ import annotations

from decimal import Context, Decimal, localcontext
from math import ceil, inf, log
from typing import Literal

import msgspec

Way = Literal["up", "down"]


class Cusum(msgspec.Struct, frozen=True):
    """A chart: reference value k, decision interval h, and the direction of change it looks for."""

    k: float
    h: float
    way: Way


def run_length(chart: Cusum, mean: float = 1.0) -> float:
    """Mean number of scores until the chart speaks, from S = 0, with scores of this mean. May be inf.

    Raises ValueError unless k and mean are positive and h is not negative.
    """
    if not (chart.k > 0 and mean > 0 and chart.h >= 0):
        raise ValueError("a CUSUM needs k > 0, h >= 0 and a positive mean")
    digits = 40 + ceil(2.0 * (chart.h + chart.k) / mean)
    with localcontext(Context(prec=digits)):
        mu = 1 / Decimal(mean)
        h, k = mu * Decimal(chart.h), mu * Decimal(chart.k)
        if chart.way == "up":
            return float(1 - _b(h + k, k))
        slope = _a(h, k) - _a(h - k, k)
        if slope <= 0:
            return inf
        return float((1 + _b(h - k, k) - _b(h, k)) / slope * _a(h, k) + _b(h, k))


def reference(theta: float) -> float:
    """The best k for a change of the mean from 1 to theta: theta ln theta / (theta - 1)."""
    return theta * log(theta) / (theta - 1.0)


def chart_for(theta: float, in_control: float) -> Cusum:
    """The CUSUM that is best for mean theta and has this mean run length while nothing changes."""
    way: Way = "up" if theta > 1 else "down"
    k = reference(theta)
    low, high = 0.0, 1.0
    while run_length(Cusum(k, high, way)) < in_control:
        low, high = high, 2.0 * high
    below, above = (log(run_length(Cusum(k, h, way)) / in_control) for h in (low, high))
    for turn in range(60):
        # ln L is nearly linear in h; halving now and then keeps a lopsided bracket from lasting.
        middle = low - below * (high - low) / (above - below) if turn % 3 < 2 else 0.5 * (low + high)
        miss = log(run_length(Cusum(k, middle, way)) / in_control)
        if abs(miss) < 1e-9 or high - low < 1e-12:
            return Cusum(k, middle, way)
        if miss < 0:
            low, below = middle, miss
        else:
            high, above = middle, miss
    return Cusum(k, high, way)


def _b(w: Decimal, k: Decimal) -> Decimal:
    """b in units of the mean: the part of the run length that the delay equation adds; 0 for w <= 0."""
    total, j = Decimal(0), 0
    while w - j * k > 0:
        total += (-1) ** j * _f(j, w - j * k)
        j += 1
    return -total


def _f(j: int, x: Decimal) -> Decimal:
    term, total = Decimal(1), Decimal((-1) ** j)
    for i in range(1, j + 1):
        term *= x / i
        total += (-1) ** (j - i) * term
    tail: Decimal = x.exp() * total - (-1) ** j
    return tail


def _a(w: Decimal, k: Decimal) -> Decimal:
    total, j = Decimal(0), 0
    while w - j * k > 0:
        x = w - j * k
        term = x
        for i in range(2, j + 2):
            term *= x / i
        total += (-1) ** j * x.exp() * term
        j += 1
    return w.exp() - (-k).exp() * total
