"""The random laws that replicates are made of, each against its exact distribution.

Keys are fixed, so that a test passes always or never; with fresh keys each would fail once in 10 000 runs.
"""

from __future__ import annotations

import numpy as np
import pytest
from numba import njit
from scipy import stats

from monitor.tail.kernels.chance import binomial, exponential_draw, key_of, resampled, start, uniform

FALSE_FAILURES = 1e-4
NO_OWNER = np.zeros(0, np.int32)
plain = njit(error_model="numpy")


@plain
def _exponentials(state, out):
    for i in range(out.size):
        out[i] = exponential_draw(state)


@plain
def _uniforms(state, out):
    for i in range(out.size):
        out[i] = uniform(state)


@plain
def _binomials(state, n, p, out):
    for i in range(out.size):
        out[i] = binomial(state, n, p)


@plain
def _started(state, key, replicate):
    start(state, key, replicate)


def generator(replicate=0, *, seed=1):
    state = np.empty(4, np.uint64)
    _started(state, key_of(seed, 7), replicate)
    return state


def test_exponential_draws_follow_the_exponential_law():
    out = np.empty(400_000)
    _exponentials(generator(), out)
    assert stats.kstest(out, "expon").pvalue > FALSE_FAILURES
    # The far end comes from a branch of its own: P(E > 7.697) = 4.54e-4.
    beyond = out[out > 7.69711747013104972] - 7.69711747013104972
    assert stats.binomtest(beyond.size, out.size, np.exp(-7.69711747013104972)).pvalue > FALSE_FAILURES
    assert stats.kstest(beyond, "expon").pvalue > FALSE_FAILURES


def test_uniform_draws_are_uniform_and_never_touch_the_ends():
    out = np.empty(400_000)
    _uniforms(generator(), out)
    assert out.min() > 0
    assert out.max() < 1
    assert stats.kstest(out, "uniform").pvalue > FALSE_FAILURES


@pytest.mark.parametrize(
    ("n", "p"),
    [(1, 0.5), (7, 0.9), (40, 0.1), (200, 0.05), (200, 0.3), (1000, 0.5), (1000, 0.97), (10**6, 0.07), (10**9, 0.0067)],
)
def test_binomial_counts_follow_the_binomial_law(n, p):
    out = np.empty(60_000, np.int64)
    _binomials(generator(seed=3), n, p, out)
    assert out.min() >= 0
    assert out.max() <= n
    # Chi-square over bins of about equal probability.
    law = stats.binom(n, p)
    bounds = np.unique(law.ppf(np.linspace(0.02, 0.98, 30)))
    cut = np.concatenate([[-1], bounds, [n]])
    expected = np.diff(law.cdf(cut)) * out.size
    seen = np.diff([np.sum(out <= c) for c in cut])
    keep = expected > 5
    assert stats.chisquare(seen[keep], expected[keep] * seen[keep].sum() / expected[keep].sum()).pvalue > FALSE_FAILURES


@pytest.mark.parametrize(("n", "p", "answer"), [(0, 0.5, 0), (5, 0.0, 0), (5, 1.0, 5)])
def test_binomial_of_certain_things(n, p, answer):
    out = np.empty(3, np.int64)
    _binomials(generator(), n, p, out)
    assert out.tolist() == [answer] * 3


@pytest.mark.parametrize("way", ["one by one", "by rows", "one event a row"])
def test_resampling_draws_every_event_alike(way):
    weights = np.array([1, 1, 1, 1, 1] if way == "one event a row" else [1, 5, 2, 30, 12])
    owner = {
        "one by one": np.repeat(np.arange(5, dtype=np.int32), weights),
        "by rows": NO_OWNER,
        "one event a row": np.zeros(1, np.int32),
    }[way]
    counts, total, draws = np.zeros(5, np.int64), np.zeros(5), 40
    squares = np.zeros(5)
    for r in range(4000):
        resampled(generator(r), draws, weights, owner, counts)
        assert counts.sum() == draws
        total += counts
        squares += counts.astype(float) ** 2
    share = weights / weights.sum()
    assert stats.chisquare(total, share * draws * 4000).pvalue > FALSE_FAILURES
    variance = squares / 4000 - (total / 4000) ** 2
    np.testing.assert_allclose(variance, draws * share * (1 - share), rtol=0.12)  # 5 standard deviations


def test_replicates_have_streams_of_their_own():
    first, again, other = generator(5), generator(5), generator(6)
    np.testing.assert_array_equal(first, again)
    assert not np.array_equal(first, other)
    assert key_of(1, 1) != key_of(1, 2) != key_of(2, 1)
    draws = np.empty((2, 50_000))
    _uniforms(first, draws[0])
    _uniforms(other, draws[1])
    assert abs(np.corrcoef(draws)[0, 1]) < 4 / np.sqrt(50_000)


def test_the_stream_is_the_same_on_every_machine():
    """Frozen by hand from the definition, in plain integers: SplitMix64 fills xoshiro256++."""
    mask = (1 << 64) - 1

    def mix(z):
        z = ((z ^ (z >> 30)) * 0xBF58476D1CE4E5B9) & mask
        z = ((z ^ (z >> 27)) * 0x94D049BB133111EB) & mask
        return z ^ (z >> 31)

    golden = 0x9E3779B97F4A7C15
    word = mix((int(key_of(1, 7)) + golden * 4) & mask)
    expected = []
    for _ in range(4):
        word = (word + golden) & mask
        expected.append(mix(word))
    assert generator(3).tolist() == expected

    def turn(x, k):
        return ((x << k) | (x >> (64 - k))) & mask

    out = (turn((expected[0] + expected[3]) & mask, 23) + expected[0]) & mask
    drawn = np.empty(1)
    _uniforms(generator(3), drawn)
    assert drawn[0] == ((out >> 11) + 0.5) / 2**53
