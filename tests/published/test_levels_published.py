"""Levels, largest events and shares against published formulas and worked examples."""

import numpy as np
import pytest

from monitor.tail.compare import compare_windows, compare_with_plan
from monitor.tail.largest import expected_largest
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import TailFit
from monitor.tail.tails import Tails
from monitor.tail.top_share import top_share_of


def pure_tail(alpha, n, xmin=1.0, counting="measured"):
    return TailFit(
        alpha=alpha, alpha_se=(alpha - 1) / n**0.5, xmin=xmin, start=0, n_tail=n, n=n,
        ks_distance=0.01, counting=counting,
    )  # fmt: skip


@pytest.mark.parametrize(("n", "alpha", "mean"), [(100, 2.5, 57.7802), (1000, 2.5, 267.9236), (10_000, 3.0, 177.2476)])
def test_mean_of_the_largest(n, alpha, mean):
    # Newman, Contemporary Physics 46 (2005) 323, section 3.3: n xmin B(n, (alpha - 2) / (alpha - 1)); values by mpmath.
    sample = Sample.of_sizes(np.array([1.0, 2.0, 3.0]))
    assert expected_largest(sample, pure_tail(alpha, n), n) == pytest.approx(mean, abs=6e-5)


def test_eighty_twenty():
    # Newman 2005, section 3.3: at alpha 2.1 the top 20 % hold 86 %, the top half 94 % [from memory].
    alpha, xmin = np.array([2.1]), np.array([1.0])
    assert top_share_of(alpha, xmin, 0.2, "measured")[0] == pytest.approx(0.8639, abs=5e-5)
    assert top_share_of(alpha, xmin, 0.5, "measured")[0] == pytest.approx(0.9389, abs=5e-5)
    exactly = np.array([1 + np.log(5) / np.log(4)])  # where 20 % hold 80 %
    assert top_share_of(exactly, xmin, 0.2, "measured")[0] == pytest.approx(0.8, abs=1e-12)


@pytest.mark.parametrize(("years", "level"), [(10, 65.93), (25, 79.95), (50, 92.24), (100, 106.21)])
def test_return_level_of_daily_rain(years, level):
    # Coles, An Introduction to Statistical Modeling of Extreme Values (2001), section 4.4.1 [from memory]: threshold
    # 30, sigma 7.44, xi .184, 152 of 17531 days; he prints 106.3 for 100 years from unrounded parameters. A generalised
    # Pareto law above u is a power law of (size - u + sigma / xi) above sigma / xi with alpha = 1 + 1 / xi.
    u, sigma, xi = 30.0, 7.44, 0.184
    shift = sigma / xi
    tails = Tails(np.array([1 + 1 / xi]), np.array([shift]), np.array([152 / 17531]), "measured")
    size = u - shift + float(np.exp(tails.log_size(1 / (365.25 * years))[0]))
    assert size == pytest.approx(level, abs=0.2)


@pytest.mark.parametrize(("n", "upper"), [(10, 2.4645), (30, 1.6668), (60, 1.4327), (100, 1.3204)])
def test_f_quantiles(n, upper):
    # 97.5 % points of F(20,20), F(60,60), F(120,120), F(200,200), any table of F: there the two-sided p is .05.
    earlier = Sample.of_sizes(np.exp(np.linspace(0.0, 2 * upper, n)))
    later = Sample.of_sizes(np.exp(np.linspace(0.0, 2.0, n)))
    found = compare_windows(earlier, later, xmin=1.0, counting="measured")
    assert found.ratio == pytest.approx(upper, rel=1e-12)
    assert found.p == pytest.approx(0.05, abs=5e-5)
    assert found.direction == "lighter"


@pytest.mark.parametrize("planned", [2.11333, 2.94342])
def test_exact_interval_as_a_test_against_the_plan(planned):
    # chi-square(100) has 2.5 and 97.5 % points 74.2219 and 129.5612 (any table): n 50, alpha_hat 2.5 gives the exact
    # interval 2.11333 .. 2.94342, at whose ends the two-sided p is .05.
    later = Sample.of_sizes(np.exp(np.linspace(0.0, 2 / 1.5, 50)))
    found = compare_with_plan(later, xmin=1.0, alpha=planned, counting="measured")
    assert found.alpha_later == pytest.approx(2.5, rel=1e-12)
    assert found.p == pytest.approx(0.05, abs=2e-4)
