"""The random laws that replicates are made of, each against its exact distribution.

Keys are fixed, so that a test passes always or never; with fresh keys each would fail once in 10 000 runs.
"""

from __future__ import annotations

import numpy as np
import pytest
from numba import njit
from scipy import stats

from monitor.tail.kernels.chance import binomial, exponential_draw, key_of, start, uniform
from monitor.tail.kernels.replicating import Body
from monitor.tail.kernels.splitting import fill_geometric, resampled, split, tree_of

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
    [
        (1, 0.5), (7, 0.9), (40, 0.1), (64, 0.43), (65, 0.99), (128, 0.07), (129, 0.08), (200, 0.05), (200, 0.3),
        (1000, 0.5), (1000, 0.97), (10**5, 0.4), (10**6, 0.07), (10**9, 0.0067),
    ],
)  # fmt: skip
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


@pytest.mark.parametrize("way", ["one by one", "by splitting", "one event a row"])
def test_resampling_draws_every_event_alike(way):
    weights = np.array([1, 1, 1, 1, 1] if way == "one event a row" else [1, 5, 2, 30, 12])
    owner = {
        "one by one": np.repeat(np.arange(5, dtype=np.int32), weights),
        "by splitting": NO_OWNER,
        "one event a row": np.zeros(1, np.int32),
    }[way]
    nothing = np.zeros(0)
    body = Body(nothing, nothing, nothing, nothing, weights, owner, tree_of(weights.astype(float)))
    counts, total, draws, held, noise = np.zeros(5, np.int64), np.zeros(5), 40, np.zeros(10), np.zeros(5)
    squares = np.zeros(5)
    for r in range(4000):
        resampled(generator(r), draws, body, held, noise, counts)
        assert counts.sum() == draws
        total += counts
        squares += counts.astype(float) ** 2
    share = weights / weights.sum()
    assert stats.chisquare(total, share * draws * 4000).pvalue > FALSE_FAILURES
    variance = squares / 4000 - (total / 4000) ** 2
    np.testing.assert_allclose(variance, draws * share * (1 - share), rtol=0.12)  # 5 standard deviations


@pytest.mark.parametrize("events", [60, 3000, 10**6, 10**9])
def test_counts_of_cells_are_multinomial(events):
    """Each cell, each sum of neighbours and the whole are binomial (scipy.stats), for cells from rare to crowded."""
    weights = np.array([0.3, 4e-9, 0.02, 0.2, 1e-4, 0.1, 0.1, 0.0, 0.15, 0.05, 0.0799])
    weights /= weights.sum()
    tree, held, noise = tree_of(weights), np.zeros(22), np.zeros(11)
    rounds = 6000
    drawn = np.empty((rounds, 11))
    for r in range(rounds):
        split(generator(r, seed=5), events, tree, held, noise)
        drawn[r] = held[11:]
    assert (drawn >= 0).all()
    assert (drawn.sum(axis=1) == events).all()
    assert (drawn[:, 7] == 0).all()
    for some in ([0], [1], [2], [3], [4], [0, 5], [2, 3, 4], [8, 9, 10], [1, 4, 9]):
        law = stats.binom(events, weights[some].sum())
        seen = drawn[:, some].sum(axis=1)
        bounds = np.unique(law.ppf(np.linspace(0.02, 0.98, 20)))
        cut = np.concatenate([[-1], bounds, [events]])
        expected = np.diff(law.cdf(cut)) * rounds
        counted = np.diff([np.sum(seen <= c) for c in cut])
        keep = expected > 5
        if keep.sum() > 1:
            scaled = expected[keep] * counted[keep].sum() / expected[keep].sum()
            assert stats.chisquare(counted[keep], scaled).pvalue > FALSE_FAILURES
        assert seen.mean() == pytest.approx(law.mean(), abs=4.5 * law.std() / np.sqrt(rounds) + 1e-12)


def test_what_one_uniform_number_settles_is_what_rejection_would_say():
    """split() looks a whole level ahead; a tree of two cells must give the binomial of the same generator."""
    held, noise = np.zeros(4), np.zeros(2)
    for share in (0.01, 0.3, 0.5, 0.7, 0.98):
        tree = tree_of(np.array([share, 1.0 - share]))
        for r in range(400):
            split(generator(r), 10**6, tree, held, noise)
            alone = np.zeros(1, np.int64)
            _binomials(generator(r), 10**6, tree[1], alone)
            assert held[2] == alone[0]
            assert held[2] + held[3] == 10**6


def test_the_first_cells_of_a_geometric_law():
    out = np.empty(400)
    fill_geometric(0.0067, out)
    np.testing.assert_allclose(out[:-1], stats.geom(-np.expm1(-0.0067)).pmf(np.arange(1, 400)), rtol=1e-12)
    assert out[-1] == pytest.approx(np.exp(-0.0067 * 399), rel=1e-13)


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
