"""Hurwitz's zeta function, by direct terms and the Euler-Maclaurin series, without a library call.

Everything is scaled: A(s, q) = q^s zeta(s, q) = sum over k >= 0 of (1 + k/q)^-s stays of the order of
1 + q/(s - 1), whatever q and s. From w = 16 + 2s on the series
    A(s, w) = w/(s - 1) + 1/2 + sum over r = 1..8 of B_2r/(2r)! s(s+1)...(s+2r-2) w^-(2r-1)
has a relative error of a few units in the last place (Abramowitz & Stegun 23.2; NIST DLMF 25.11.5); before, terms
are added one by one.
"""

from __future__ import annotations

from typing import Any, NamedTuple

from monitor.tail.kernels.arithmetic import exp_apart, log_one_plus, log_ratio, logarithm
from monitor.tail.kernels.compiling import helper, inner, kernel

NEGLIGIBLE = 1e-18
"""A term this small, and with it all that follow, does not change a sum that begins with 1."""

# B_2r / (2r)! for r = 1..8
_B1, _B2, _B3, _B4 = 1 / 12, -1 / 720, 1 / 30240, -1 / 1209600
_B5, _B6, _B7, _B8 = 1 / 47900160, -691 / 1307674368000, 1 / 74724249600, -3617 / 10670622842880000
BERNOULLI = (_B1, _B2, _B3, _B4, _B5, _B6, _B7, _B8)


class MeanLog(NamedTuple):
    """E[ln(X/q)] under the zeta law from q on, and its derivative in the exponent (minus the variance)."""

    mean: float
    slope: float


@helper
def series_starts(s: float) -> Any:
    """From here on the series may be used."""
    return 16.0 + 2.0 * s


@helper
def fill_series(s: float, series: Any) -> None:
    """Coefficients of the series in powers of 1/w, into float64 (9,)."""
    product = s
    for r in range(8):
        series[r] = BERNOULLI[r] * product
        product *= (s + 2 * r + 1) * (s + 2 * r + 2)
    series[8] = 1.0 / (s - 1.0)


@helper
def by_series(series: Any, w: float) -> Any:
    """A(s, w) for w at or beyond series_starts(s)."""
    inverse = 1.0 / w
    v = inverse * inverse
    high = series[4] + v * (series[5] + v * (series[6] + v * series[7]))
    return w * series[8] + 0.5 + inverse * (series[0] + v * (series[1] + v * (series[2] + v * (series[3] + v * high))))


@kernel
def scaled_zeta(s: float, q: float, series: Any) -> Any:
    """A(s, q) = q^s zeta(s, q) for s > 1, q >= 1; `series` as filled for s."""
    begin = series_starts(s)
    total = 0.0
    k = 0.0
    while q + k < begin:
        term = exp_apart(-s * log_ratio(q + k, q))
        total += term
        k += 1.0
        if term < NEGLIGIBLE:
            return total
    return total + exp_apart(-s * log_ratio(q + k, q)) * by_series(series, q + k)


@inner
def _remainder(s: float, w: float) -> Any:
    """The series with its first and second derivative in s."""
    inverse = 1.0 / (s - 1.0)
    a = w * inverse + 0.5
    a1 = -w * inverse * inverse
    a2 = 2.0 * w * inverse * inverse * inverse
    power = 1.0 / w
    step = power * power
    p, p1, p2 = s, 1.0, 0.0
    for r in range(8):
        c = BERNOULLI[r] * power
        a += c * p
        a1 += c * p1
        a2 += c * p2
        for m in range(2):
            t = s + (2 * r + 1 + m)
            p2 = p2 * t + 2.0 * p1
            p1 = p1 * t + p
            p = p * t
        power *= step
    return a, a1, a2


@kernel
def mean_log(s: float, q: float) -> Any:
    """MeanLog at exponent s > 1 from q >= 1 on."""
    z, z1, z2 = 0.0, 0.0, 0.0
    begin = series_starts(s)
    k = 0.0
    while q + k < begin:
        height = log_ratio(q + k, q)
        term = exp_apart(-s * height)
        z += term
        z1 -= term * height
        z2 += term * height * height
        k += 1.0
        if term < NEGLIGIBLE:
            mean = -z1 / z
            return MeanLog(mean, mean * mean - z2 / z)
    height = log_ratio(q + k, q)
    scale = exp_apart(-s * height)
    a, a1, a2 = _remainder(s, q + k)
    z += scale * a
    z1 += scale * (a1 - height * a)
    z2 += scale * (a2 - 2.0 * height * a1 + height * height * a)
    mean = -z1 / z
    return MeanLog(mean, mean * mean - z2 / z)


@kernel
def exponent(q: float, mean: float, within: float, guess: float) -> Any:
    """The s at which E[ln(X/q)] + (s - 2) within = mean: the exponent of highest likelihood.

    `within` is the mean variance of ln X inside rows that hold several integers, 0 for exact sizes; see whole.py.
    Newton's method on 1/E, which is nearly a straight line in s; each step at most a factor of three in s - 1. With
    guess <= 1 it starts from the approximation 1 + 1/(mean - ln(1 - 1/2q)) of Clauset, Shalizi & Newman (eq. 3.7),
    so that the result depends on q, mean and within alone. NaN if it does not settle.
    """
    s = guess
    if s <= 1.0:
        half = -0.5 / q
        s = 1.0 + 1.0 / (mean - (log_one_plus(half) if half > -0.29 else logarithm(1.0 + half)))
    for _ in range(60):
        at = mean_log(s, q)
        value = at.mean + (s - 2.0) * within
        slope = at.slope + within
        low = 1.0 + (s - 1.0) / 3.0
        high = 1.0 + (s - 1.0) * 3.0
        moved = low
        if value > 1e-280 and slope < 0.0:
            moved = min(max(s + (value - value * value / mean) / slope, low), high)
        step = abs(moved - s)
        s = moved
        if step <= 1e-9 * (s - 1.0):  # the next step would be of the order of its square
            return s
    return float("nan")
