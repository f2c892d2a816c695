"""Intervals of the exponent: exact ones against their law, likelihood ones against coverage."""

from __future__ import annotations

import numpy as np
import pytest

from monitor.tail.interval import alpha_at_given_xmin, alpha_by_likelihood, alpha_exact, of_draws
from monitor.tail.judgement import Options
from monitor.tail.sample import Sample
from monitor.tail.scan import law_of
from tests.tail.test_scanning import on_grid


def test_order_statistics_10_and_391_of_400():
    shuffled = np.random.default_rng(1).permutation(np.arange(1, 401))
    assert of_draws(shuffled) == (10.0, 391.0)


def test_too_few_draws_give_no_interval():
    assert of_draws(np.arange(39.0)) == (None, None)
    assert of_draws(np.arange(40.0)) == (0.0, 39.0)


def test_likelihood_interval_of_a_normal_likelihood_is_the_normal_one():
    low, high = alpha_by_likelihood(lambda a: -0.5 * ((a - 2.5) / 0.01) ** 2, 2.5)
    assert (low, high) == pytest.approx((2.5 - 0.0195996, 2.5 + 0.0195996), abs=1e-6)


def draws(counting, n, rng):
    if counting == "whole":
        # Devroye, Non-Uniform Random Variate Generation (1986), section X.6.1; numpy's own zeta generator.
        return rng.zipf(2.5, n).astype(float)
    return rng.random(n) ** (-1 / 1.5)


@pytest.mark.parametrize(("counting", "where"), [("measured", "exact"), ("measured", "grid"), ("whole", "exact")])
def test_coverage_at_a_given_xmin(counting, where):
    """400 samples of 100: between 361 and 395 of the 95 % intervals hold alpha; outside with a chance below 1e-3."""
    rng = np.random.default_rng(2)
    held = 0
    for _ in range(400):
        sizes = draws(counting, 100, rng)
        sample = on_grid(sizes) if where == "grid" else Sample.of_sizes(sizes)
        law = law_of(sample, Options(counting=counting, xmin=1.0))
        low, high = alpha_at_given_xmin(law.fit(), law)
        held += low <= 2.5 <= high
    assert 361 <= held <= 395


def test_exact_and_likelihood_intervals_agree_for_many_events():
    rng = np.random.default_rng(3)
    law = law_of(Sample.of_sizes(draws("measured", 20_000, rng)), Options(xmin=1.0))
    fit = law.fit()
    exact, likely = alpha_exact(fit.alpha, fit.n_tail), alpha_by_likelihood(law.profile(fit), fit.alpha)
    assert exact == pytest.approx(likely, abs=1e-4)


@pytest.mark.parametrize("counting", ["measured", "whole"])
def test_grid_and_exact_standard_errors_agree_for_fine_cells(counting):
    rng = np.random.default_rng(4)
    sizes = np.floor(1000 * draws("measured", 5000, rng))
    fits = [
        law_of(sample, Options(counting=counting, xmin=1000.0)).fit()
        for sample in (Sample.of_sizes(sizes), on_grid(sizes))
    ]
    assert fits[0].alpha == pytest.approx(fits[1].alpha, abs=0.006)
    assert fits[0].alpha_se == pytest.approx(fits[1].alpha_se, rel=0.01)
