"""Chance that belongs to a place: numbers that are a pure function of what they are for.

Order inside a slot, the place of exceedances among a slot's events and the tie-breaking of ranks need random
numbers that are the same on every machine, after every restart and in every later re-derivation. They come from
SplitMix64 (G. Steele, D. Lea & C. Flood, OOPSLA 2014) run as a counter: word i is the finaliser of
key + (i + 1) * golden ratio, and the key is a digest of the purpose. Only integer arithmetic and one exact
conversion (53 bits times a power of two) are involved, so that no library's choice of algorithm can change them.
"""

from __future__ import annotations

from hashlib import blake2b

import numpy as np
from numpy.typing import NDArray

_GOLDEN = np.uint64(0x9E3779B97F4A7C15)
_MIX_1 = np.uint64(0xBF58476D1CE4E5B9)
_MIX_2 = np.uint64(0x94D049BB133111EB)
_UNIT = 2.0**-53


def key_of(*parts: str | int) -> int:
    """The 64-bit key of a purpose: a digest of its parts, each with its length, so that none runs into the next."""
    digest = blake2b(digest_size=8)
    for part in parts:
        text = str(part).encode()
        digest.update(len(text).to_bytes(4, "big") + text)
    return int.from_bytes(digest.digest(), "big")


def words(key: int, start: int, count: int) -> NDArray[np.uint64]:
    """Words start .. start + count - 1 of the counter-based stream of `key`; uint64 (count,)."""
    z = np.uint64(key) + (np.arange(start + 1, start + count + 1, dtype=np.uint64) * _GOLDEN)
    z = (z ^ (z >> np.uint64(30))) * _MIX_1
    z = (z ^ (z >> np.uint64(27))) * _MIX_2
    out: NDArray[np.uint64] = z ^ (z >> np.uint64(31))
    return out


def uniforms(key: int, start: int, count: int) -> NDArray[np.float64]:
    """Uniform numbers inside (0, 1), float64 (count,): the middle of 2^53 equal steps, so never 0 or 1."""
    out: NDArray[np.float64] = ((words(key, start, count) >> np.uint64(12)).astype(np.float64) + 0.5) * (2 * _UNIT)
    return out


def uniform(key: int, index: int = 0) -> float:
    """One uniform number inside (0, 1)."""
    return float(uniforms(key, index, 1)[0])


def permutation(key: int, n: int) -> NDArray[np.int64]:
    """A uniformly random order of n things, int64 (n,): their words sorted (ties have chance n^2 2^-65)."""
    return np.argsort(words(key, 0, n), kind="stable").astype(np.int64)


def subset(key: int, n: int, m: int) -> NDArray[np.int64]:
    """A uniformly random subset of m of the places 1..n, int64 (m,), ascending.

    Places are drawn one after another and repeated ones passed over, which is sampling without replacement; for
    m > n/2 the places left out are drawn instead. Cost O(m), never O(n) for a rare kind of event.
    """
    if 2 * m > n:
        out = np.ones(n, bool)
        out[subset(key, n, n - m) - 1] = False
        return np.flatnonzero(out) + 1
    kept = np.empty(0, np.int64)
    drawn = 0
    while kept.size < m:
        more = 2 * (m - kept.size) + 8
        # An exact product rounded once: the chance of a place is off by less than n 2^-53.
        places = (uniforms(key, drawn, more) * n).astype(np.int64) + 1
        drawn += more
        kept = _first_seen(np.concatenate((kept, places)))
    return np.sort(kept[:m])


def _first_seen(values: NDArray[np.int64]) -> NDArray[np.int64]:
    """The distinct values in the order in which they were first seen."""
    _, first = np.unique(values, return_index=True)
    return values[np.sort(first)]
