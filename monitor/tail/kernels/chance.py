"""Random numbers for replicates: each replicate has a generator of its own, addressed by (key, replicate).

The state of xoshiro256++ (D. Blackman & S. Vigna, Scrambled linear pseudorandom number generators, ACM
Transactions on Mathematical Software 47 (2021) 36) is filled by SplitMix64 (G. Steele, D. Lea & C. Flood,
OOPSLA 2014) from the key and the number of the replicate. So a replicate does not depend on which thread draws
it, when, or after which others. The laws are exact up to the 53 bits of a double.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from monitor.tail.kernels.arithmetic import exp_apart, log_one_plus, log_ratio, logarithm
from monitor.tail.kernels.compiling import helper, inner, int64, kernel

_GOLDEN = np.uint64(0x9E3779B97F4A7C15)
_MIX_1 = np.uint64(0xBF58476D1CE4E5B9)
_MIX_2 = np.uint64(0x94D049BB133111EB)
_UNIT = 1.0 / 9007199254740992.0  # 2^-53
_FEW = 128

REJECTED_FROM = 10.0
"""Binomials of at least this mean are drawn by rejection."""

MIDDLE = 0.86
"""Share of the squeeze where one uniform number is enough."""


@helper
def mixed(z: Any) -> Any:
    """SplitMix64's finaliser: a bijection of 64-bit words in which every bit touches every other."""
    z = (z ^ (z >> np.uint64(30))) * _MIX_1
    z = (z ^ (z >> np.uint64(27))) * _MIX_2
    return z ^ (z >> np.uint64(31))


@helper
def start(state: Any, key: Any, replicate: int) -> None:
    """Fill uint64 (4,) `state` for this replicate."""
    word = mixed(np.uint64(key) + _GOLDEN * (np.uint64(replicate) + np.uint64(1)))
    for k in range(4):
        word = word + _GOLDEN
        state[k] = mixed(word)


@helper
def _rotated(x: Any, k: int) -> Any:
    return (x << np.uint64(k)) | (x >> np.uint64(64 - k))


@helper
def word(state: Any) -> Any:
    """The next 64 random bits."""
    out = _rotated(state[0] + state[3], 23) + state[0]
    shifted = state[1] << np.uint64(17)
    state[2] ^= state[0]
    state[3] ^= state[1]
    state[1] ^= state[2]
    state[0] ^= state[3]
    state[2] ^= shifted
    state[3] = _rotated(state[3], 45)
    return out


@helper
def uniform(state: Any) -> Any:
    """Uniform on the open interval (0, 1)."""
    return (np.float64(word(state) >> np.uint64(11)) + 0.5) * _UNIT


# -- exponential: ziggurat with 256 layers (G. Marsaglia & W. W. Tsang, Journal of Statistical Software 5 (2000) 8)
_EDGE = 7.69711747013104972
_AREA = 0.0039496598225815571993


@kernel
def _layers(edges: Any, heights: Any) -> None:
    """Right edges of the layers and the density there, from our own exp and log so that they never differ."""
    edges[0] = _AREA / exp_apart(-_EDGE)
    edges[1] = _EDGE
    for i in range(2, 256):
        edges[i] = -logarithm(exp_apart(-edges[i - 1]) + _AREA / edges[i - 1])
    edges[256] = 0.0
    for i in range(257):
        heights[i] = exp_apart(-edges[i])


def _tables() -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    edges = np.zeros(257)
    heights = np.zeros(257)
    _layers(edges, heights)
    return edges, heights


_EDGES, _HEIGHTS = _tables()


@inner
def _exponential_rare(state: Any, layer: Any, x: float) -> Any:
    """The one draw in a hundred that the layer's rectangle does not settle; below 0: draw again."""
    height = _HEIGHTS[layer] + (_HEIGHTS[layer + 1] - _HEIGHTS[layer]) * uniform(state)
    if height < exp_apart(-x):
        return x
    return -1.0


@helper
def exponential_draw(state: Any) -> Any:
    """One draw from the exponential law of mean 1."""
    past = 0.0
    while True:
        bits = word(state)
        layer = int64(bits & np.uint64(255))
        x = np.float64(bits >> np.uint64(11)) * _UNIT * _EDGES[layer]
        if x < _EDGES[layer + 1]:
            return past + x
        if layer == 0:
            past += _EDGE  # beyond the last layer the law begins afresh
            continue
        x = _exponential_rare(state, layer, x)
        if x >= 0.0:
            return past + x


# -- binomial
@helper
def _log1m(p: float) -> Any:
    """ln(1 - p) for 0 < p <= 1/2."""
    if p < 0.29:
        return log_one_plus(-p)
    return logarithm(1.0 - p)


@inner
def _by_waiting(state: Any, n: float, p: float) -> Any:
    """Binomial by waiting times: failures before each success are geometric. About n p + 1 draws."""
    scale = -1.0 / _log1m(p)
    successes = 0
    trials = 0.0
    while True:
        trials += np.floor(exponential_draw(state) * scale) + 1.0
        if trials > n:
            return successes
        successes += 1


@helper
def _stirling(k: int) -> Any:
    """ln k! minus Stirling's formula at k + 1 (the correction of W. Hoermann 1993, table for small k)."""
    if k < 10:
        return _STIRLING[k]
    v = 1.0 / (k + 1.0)
    return (1.0 / 12.0 - (1.0 / 360.0 - v * v / 1260.0) * v * v) * v


_STIRLING = np.array(
    [
        0.08106146679532726, 0.04134069595540929, 0.02767792568499834, 0.02079067210376509, 0.01664469118982119,
        0.01387612882307075, 0.01189670994589177, 0.01041126526197209, 0.009255462182712733, 0.008330563433362871,
    ]
)  # fmt: skip


@inner
def _signed_log_ratio(a: float, b: float) -> Any:
    if a >= b:
        return log_ratio(a, b)
    return -log_ratio(b, a)


@inner
def _log_weight(n: float, p: float, k: float, mode: float) -> Any:
    """ln of the binomial probability of k over that of the mode."""
    odds = p / (1.0 - p)
    return (
        (mode + 0.5) * _signed_log_ratio(mode + 1.0, odds * (n - mode + 1.0))
        + (n + 1.0) * _signed_log_ratio(n - mode + 1.0, n - k + 1.0)
        + (k + 0.5) * _signed_log_ratio(odds * (n - k + 1.0), k + 1.0)
        + (_stirling(int64(mode)) + _stirling(int64(n - mode)))
        - (_stirling(int64(k)) + _stirling(int64(n - k)))
    )


@inner
def _accepted(n: float, p: float, k: float, log_height: float) -> Any:
    """Does a point at this height, relative to the mode's, lie under the binomial law at k? First by two bounds."""
    mode = np.floor((n + 1.0) * p)
    away = abs(k - mode)
    if away > 15.0:
        variance = n * p * (1.0 - p)
        margin = (away / variance) * (((away / 3.0 + 0.625) * away + 1.0 / 6.0) / variance + 0.5)
        normal = -away * away / (2.0 * variance)
        if log_height < normal - margin:
            return True
        if log_height > normal + margin:
            return False
    return log_height <= _log_weight(n, p, k, mode)


@inner
def by_rejection(state: Any, n: float, p: float, v: float) -> Any:
    """Binomial by transformed rejection with squeeze and decomposition, for n p >= REJECTED_FROM and p <= 1/2.

    Algorithm BTRD of W. Hoermann, The generation of binomial random variates, Journal of Statistical
    Computation and Simulation 46 (1993) 101-110; constants of that paper. v is a uniform number: mostly it alone
    settles the count, under the squeeze, in the middle of the table. float64.
    """
    spread = np.sqrt(n * p * (1.0 - p))
    b = 1.15 + 2.53 * spread
    a = -0.0873 + 0.0248 * b + 0.01 * p
    c = n * p + 0.5
    sure = 0.92 - 4.2 / b
    while True:
        u = v / sure
        if u <= MIDDLE:
            u -= 0.5 * MIDDLE
            return np.floor((2.0 * a / (0.5 - abs(u)) + b) * u + c)
        if u >= 1.0:
            u = uniform(state) - 0.5
        else:  # the rest of the squeeze: the two ends of u, 0.43 and more from the middle
            u -= 0.5 + 0.5 * MIDDLE
            u = (0.5 if u >= 0.0 else -0.5) - u
            v = uniform(state) * sure
        us = 0.5 - abs(u)
        if us > 0.0:
            k = np.floor((2.0 * a / us + b) * u + c)
            height = v * (2.83 + 5.1 / b) * spread / (a / (us * us) + b)
            if 0.0 <= k <= n and _accepted(n, p, k, logarithm(height)):
                return k
        v = uniform(state)


@helper
def _ones(x: Any) -> Any:
    """How many of 64 bits are set."""
    x = x - ((x >> np.uint64(1)) & np.uint64(0x5555555555555555))
    x = (x & np.uint64(0x3333333333333333)) + ((x >> np.uint64(2)) & np.uint64(0x3333333333333333))
    x = (x + (x >> np.uint64(4))) & np.uint64(0x0F0F0F0F0F0F0F0F)
    return int64((x * np.uint64(0x0101010101010101)) >> np.uint64(56))


@inner
def _by_bits(state: Any, n: int, p: float) -> Any:
    """Binomial of up to 64 trials of chance p < 1, all compared with p at once, bit after bit of its binary digits:
    a trial is settled at the first digit in which it differs from p."""
    digits = np.uint64(p * 18446744073709551616.0)  # 2^64
    open_trials = ~np.uint64(0) >> np.uint64(64 - n)
    below = np.uint64(0)
    while open_trials != np.uint64(0) and digits != np.uint64(0):
        bits = word(state)
        if digits >> np.uint64(63):
            below |= open_trials & ~bits
            open_trials &= bits
        else:
            open_trials &= ~bits
        digits = digits << np.uint64(1)
    return _ones(below)


@kernel
def binomial(state: Any, n: float, p: float) -> Any:
    """Number of successes in n trials of chance p (int64 n >= 0, 0 <= p <= 1)."""
    if n <= 0 or p <= 0.0:
        return int64(0)
    if p >= 1.0:
        return int64(n)
    if n <= _FEW:
        return _by_bits(state, min(int64(n), int64(64)), p) + (_by_bits(state, int64(n) - 64, p) if n > 64 else 0)
    q = p if p <= 0.5 else 1.0 - p
    trials = np.float64(n)
    if trials * q < REJECTED_FROM:
        k = int64(_by_waiting(state, trials, q))
    else:
        k = int64(by_rejection(state, trials, q, uniform(state)))
    return k if p <= 0.5 else int64(n - k)


# -- draws with replacement
@inner
def picked(state: Any, draws: int, owner: Any, total: Any, counts: Any) -> None:
    """Histogram of `draws` uniform picks among `total` events; owner[e] is the row of event e (empty: row e).

    Two 32-bit picks from each 64-bit word, without bias (D. Lemire, ACM TOMACS 29 (2019) 3).
    """
    width = np.uint64(total)
    unfair = np.uint64((4294967296 - total) % total)
    same = owner.size == 0
    done = 0
    while done < draws:
        bits = word(state)
        for _ in range(2):
            product = (bits & np.uint64(0xFFFFFFFF)) * width
            bits = bits >> np.uint64(32)
            if (product & np.uint64(0xFFFFFFFF)) < unfair or done == draws:
                continue
            event = int64(product >> np.uint64(32))
            counts[event if same else int64(owner[event])] += 1
            done += 1


def key_of(seed: int, purpose: int) -> Any:
    """The key of one family of replicates: a 64-bit word from the seed and what it is used for."""
    mask = (1 << 64) - 1
    z = (seed * 0x9E3779B97F4A7C15 + purpose * 0xD1B54A32D192ED03 + 0x2545F4914F6CDD1D) & mask
    z = ((z ^ (z >> 30)) * 0xBF58476D1CE4E5B9) & mask
    z = ((z ^ (z >> 27)) * 0x94D049BB133111EB) & mask
    return np.uint64(z ^ (z >> 31))
