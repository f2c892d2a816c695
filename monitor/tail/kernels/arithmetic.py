"""Exponential and logarithm from additions, multiplications and divisions alone.

The libraries of two machines may disagree in the last bit of exp and log; IEEE 754 basic operations may not.
With these two functions a fit and its bootstrap come out the same to the last bit everywhere. They are also
faster in a loop, because a compiler can vectorise them.

Reduction to a small interval as in W. J. Cody & W. Waite, Software Manual for the Elementary Functions (1980);
the polynomials are the Taylor series of exp and of 2 artanh, long enough for the last bit.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from monitor.tail.kernels.compiling import helper, kernel

# ln 2 in two parts; the first has its last 32 bits clear, so that k * LN2_HIGH is exact for |k| < 2^31.
LN2_HIGH = 6.93147180369123816490e-01
LN2_LOW = 1.90821492927058770002e-10
LOG2_E = 1.4426950408889634

SMALLEST_EXPONENT = -708.0
"""exp below this is given as exp(-708), about 3e-308: nothing here can tell it from nought."""

_SQRT_HALF_BITS = np.uint64(0x3FE6A09E667F3BCD)
_ONE_BITS = np.uint64(0x3FF0000000000000)
_MANTISSA = np.uint64(0x000FFFFFFFFFFFFF)

# 1/k! for k = 2..13, and 2/(2k + 1) for k = 1..11
_E2, _E3, _E4, _E5, _E6, _E7 = 1 / 2, 1 / 6, 1 / 24, 1 / 120, 1 / 720, 1 / 5040
_E8, _E9, _E10, _E11, _E12, _E13 = 1 / 40320, 1 / 362880, 1 / 3628800, 1 / 39916800, 1 / 479001600, 1 / 6227020800
_L1, _L2, _L3, _L4, _L5, _L6 = 2 / 3, 2 / 5, 2 / 7, 2 / 9, 2 / 11, 2 / 13
_L7, _L8, _L9, _L10, _L11 = 2 / 15, 2 / 17, 2 / 19, 2 / 21, 2 / 23


@helper
def exp_nonpositive(x: float) -> Any:
    """exp(x) for x <= 0, within 2 units in the last place."""
    if x < SMALLEST_EXPONENT:
        x = SMALLEST_EXPONENT
    k = np.floor(x * LOG2_E + 0.5)
    r = (x - k * LN2_HIGH) - k * LN2_LOW
    r2 = r * r
    r4 = r2 * r2
    low = (1.0 + r) + r2 * (_E2 + r * _E3)
    middle = (_E4 + r * _E5) + r2 * (_E6 + r * _E7)
    high = ((_E8 + r * _E9) + r2 * (_E10 + r * _E11)) + r4 * (_E12 + r * _E13)
    series = low + r4 * middle + (r4 * r4) * high
    return series * np.int64((np.int64(k) + np.int64(1023)) << np.int64(52)).view(np.float64)


@kernel
def exponential(x: float) -> Any:
    """exp(x) for any x; infinite beyond the largest double."""
    if x <= 0.0:
        return exp_nonpositive(x)
    half = exp_nonpositive(-0.5 * x)
    return 1.0 / half / half


@helper
def log_one_plus(f: float) -> Any:
    """ln(1 + f) for -0.3 < f < 0.42, also where f is tiny."""
    s = f / (2.0 + f)
    z = s * s
    z2 = z * z
    even = _L1 + z2 * (_L3 + z2 * (_L5 + z2 * (_L7 + z2 * (_L9 + z2 * _L11))))
    odd = _L2 + z2 * (_L4 + z2 * (_L6 + z2 * (_L8 + z2 * _L10)))
    half = 0.5 * f * f
    return f - (half - s * (half + z * (even + z * odd)))


@helper
def log_in_place(x: float) -> Any:
    """ln(x) for finite x > 0, subnormal numbers included, within 2 units in the last place."""
    scale = 0.0
    if x < 2.2250738585072014e-308:
        x *= 18014398509481984.0  # 2^54
        scale = -54.0
    bits = np.float64(x).view(np.uint64) + (_ONE_BITS - _SQRT_HALF_BITS)
    k = np.float64(np.int64(bits >> np.uint64(52)) - np.int64(1023)) + scale
    f = np.uint64((bits & _MANTISSA) + _SQRT_HALF_BITS).view(np.float64) - 1.0
    return k * LN2_HIGH + (log_one_plus(f) + k * LN2_LOW)


@kernel
def logarithm(x: float) -> Any:
    """log_in_place as a call."""
    return log_in_place(x)


@kernel
def log_ratio(a: float, b: float) -> Any:
    """ln(a / b) for a >= b > 0, accurate also where a and b are large neighbours."""
    f = (a - b) / b
    if f < 0.4:
        return log_one_plus(f)
    return logarithm(a / b)


@kernel
def exp_apart(x: float) -> Any:
    """exp_nonpositive as a call, for places where speed does not hang on it and code would swell."""
    return exp_nonpositive(x)
