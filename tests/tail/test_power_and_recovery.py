"""What the method can and cannot do, by simulation with fixed seeds: true parameters found, p as promised, power."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from monitor.tail.gof import Bootstrap
from monitor.tail.judgement import Options
from monitor.tail.sample import Sample
from monitor.tail.scan import find_tail, law_of
from tests.tail.test_scanning import on_grid

# All alphas and xmins below were drawn once; each bound is four standard errors or more of what is measured.


def with_body(rng, n, alpha, xmin, share, *, whole=False):
    k = rng.binomial(n, share)
    # A smooth body: the density falls off towards xmin's from a hump below.
    body = xmin * np.exp(-np.abs(rng.normal(0.0, 0.8, n - k)))
    tail = xmin * rng.random(k) ** (-1 / (alpha - 1))
    sizes = np.concatenate([body, tail])
    return np.maximum(np.floor(sizes + 0.5), 1.0) if whole else sizes


@pytest.mark.parametrize("alpha", [1.6, 2.0, 2.5, 3.2])
@pytest.mark.parametrize("xmin", [0.02, 30.0, 1e6])
def test_exponent_and_lower_end_are_found(alpha, xmin):
    rng = np.random.default_rng(1)
    fits = [find_tail(Sample.of_sizes(with_body(rng, 5000, alpha, xmin, 0.3)), Options()) for _ in range(40)]
    assert np.median([f.alpha for f in fits]) == pytest.approx(alpha, abs=0.08 * (alpha - 1))
    assert 0.7 < np.median([f.xmin for f in fits]) / xmin < 1.6


def test_whole_sizes_are_recovered():
    rng = np.random.default_rng(2)
    options = Options(counting="whole")
    fits = [find_tail(Sample.of_sizes(rng.zipf(2.5, 2000).astype(float)), options) for _ in range(40)]
    assert np.median([f.alpha for f in fits]) == pytest.approx(2.5, abs=0.05)
    assert np.mean([f.xmin == 1 for f in fits]) > 0.5


def test_the_grid_loses_nothing_that_matters():
    rng = np.random.default_rng(3)
    pairs = []
    for _ in range(40):
        sizes = with_body(rng, 20_000, 2.5, 10.0, 0.1)
        pairs.append([find_tail(Sample.of_sizes(sizes), Options()).alpha, find_tail(on_grid(sizes), Options()).alpha])
    exact, grid = np.sqrt(np.mean((np.array(pairs) - 2.5) ** 2, axis=0))
    assert grid < 1.25 * exact


@pytest.mark.parametrize(("counting", "where"), [("measured", "exact"), ("measured", "grid"), ("whole", "exact")])
def test_p_is_uniform_under_the_null_at_a_given_xmin(counting, where):
    """600 samples of 50, 199 replicates; Kolmogorov at 1e-4. Exactly uniform for measured sizes, nearly for others."""
    rng = np.random.default_rng(4)
    ps = []
    for i in range(600):
        sizes = rng.zipf(2.5, 50).astype(float) if counting == "whole" else rng.random(50) ** (-1 / 1.5)
        sample = on_grid(sizes) if where == "grid" else Sample.of_sizes(sizes)
        options = Options(counting=counting, xmin=1.0, replicates=199, stop_early=False, seed=i)
        law = law_of(sample, options)
        bootstrap = Bootstrap(law, law.fit(), options)
        ps.append((bootstrap.run().far.sum() + rng.random()) / 200)
    assert stats.kstest(ps, "uniform").pvalue > 1e-4


def p_values(make, *, samples=60, replicates=200):
    found = []
    for i in range(samples):
        sample = Sample.of_sizes(make(np.random.default_rng(1000 + i)))
        options = Options(replicates=replicates, stop_early=False, seed=i)
        law = law_of(sample, options)
        found.append(Bootstrap(law, law.fit(), options).run().far.mean())
    return np.array(found)


def test_p_with_a_chosen_xmin_is_not_quite_uniform():
    """Documented departure: with a body unlike the tail and xmin chosen anew, P(p <= .1) lies between .05 and .22."""
    p = p_values(lambda rng: with_body(rng, 1000, 2.5, 10.0, 0.3), samples=150)
    assert 0.01 <= np.mean(p <= 0.1) <= 0.32
    assert np.mean(p > 0.5) > 0.25


@pytest.mark.parametrize(
    ("name", "make", "power"),
    [
        ("exponential", lambda rng: rng.exponential(1.0, 2000) + 1.0, 0.6),
        ("lognormal", lambda rng: np.exp(np.abs(rng.normal(0.0, 1.0, 4000))), 0.5),
    ],
)
def test_other_tails_are_ruled_out_when_the_tail_must_be_long(name, make, power):
    """Share ruled out at p <= 0.1 when the tail must hold a quarter of the events; 60 samples."""
    found = []
    for i in range(60):
        sizes = make(np.random.default_rng(2000 + i))
        options = Options(min_tail=sizes.size // 4, replicates=200, stop_early=False, seed=i)
        law = law_of(Sample.of_sizes(sizes), options)
        found.append(Bootstrap(law, law.fit(), options).run().far.mean() <= 0.1)
    assert np.mean(found) > power
