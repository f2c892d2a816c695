"""Exact laws of the exponent's estimators, and published values of the zeta function."""

from __future__ import annotations

import numpy as np
import pytest
from numba import njit
from scipy import stats

from monitor.tail.interval import alpha_exact
from monitor.tail.judgement import Options
from monitor.tail.kernels.zeta import exponent, fill_series, mean_log, scaled_zeta
from monitor.tail.sample import Sample
from monitor.tail.scan import find_tail, law_of


@njit
def zeta(s, q):
    series = np.empty(9)
    fill_series(s, series)
    return scaled_zeta(s, q, series) * q**-s


# Abramowitz & Stegun, Handbook of Mathematical Functions, 23.2 and table 23.3; longer values by mpmath at 25 digits.
@pytest.mark.parametrize(
    ("s", "q", "value"),
    [
        (2, 1, 1.644934066848226),
        (3, 1, 1.202056903159594),
        (2.5, 1, 1.341487257250917),
        (1.5, 1, 2.612375348685488),
        (1.01, 1, 100.577943338497),
        (2, 2, 0.644934066848226),
        (2.5, 5, 0.0693105320443219),
        (2.5, 10, 0.0227286991945345),
        (1.95, 7, 0.177509188228242),
        (2, 1000, 0.00100050016666663),
    ],
)
def test_zeta_values(s, q, value):
    assert zeta(float(s), float(q)) == pytest.approx(value, rel=3e-14)


@pytest.mark.parametrize(("q", "mean"), [(1.0, 0.288740685558), (5.0, 2.17877381656)])
def test_mean_logarithm_at_exponent_2_5(q, mean):
    """E[ln X], by mpmath."""
    assert mean_log(2.5, q).mean + np.log(q) == pytest.approx(mean, rel=1e-11)


@pytest.mark.parametrize(
    ("alpha", "xmin", "scaled"),
    [(2.5, 1, 1.689217), (2.5, 5, 1.506667), (2, 1, 1.063299), (1.95, 7, 0.950833), (3, 10, 2.003651)],
)
def test_standard_error_of_the_discrete_exponent(alpha, xmin, scaled):
    """sd(alpha_hat) sqrt n = Var(ln X)^-1/2, Clauset, Shalizi & Newman eq. B.19; by mpmath."""
    assert (-mean_log(float(alpha), float(xmin)).slope) ** -0.5 == pytest.approx(scaled, abs=1e-6)


def test_continuous_estimator_on_discrete_data():
    """Clauset, Shalizi & Newman, table of estimators [from memory]: 4.46(3); its limit is 1 + 1/E[ln X] = 4.463315."""
    assert 1 + 1 / mean_log(2.5, 1.0).mean == pytest.approx(4.463315, abs=1e-6)
    sizes = np.random.default_rng(1).zipf(2.5, 10_000).astype(float)
    assert find_tail(Sample.of_sizes(sizes), Options(xmin=1.0)).alpha == pytest.approx(4.46, abs=0.15)


def test_discrete_estimator_on_continuous_data_rounded_down():
    """The same table [from memory]: 2.19(1); the limit by scipy is 2.186523."""
    sizes = np.floor(np.random.default_rng(2).random(200_000) ** (-1 / 1.5))
    fit = find_tail(Sample.of_sizes(np.minimum(sizes, 2.0**53)), Options(xmin=1.0, counting="whole"))
    assert fit.alpha == pytest.approx(2.186523, abs=4 * fit.alpha_se)


@pytest.mark.parametrize(("xmin", "limit"), [(1, 2.01845), (2, 2.37209), (6, 2.48791), (20, 2.49902)])
def test_half_integer_approximation_is_not_what_we_use(xmin, limit):
    """1 + 1/E[ln(X/(xmin - 1/2))] at alpha 2.5, by mpmath: off by 1 % and more below xmin 6; ours is not."""
    mean = mean_log(2.5, float(xmin)).mean
    assert 1 + 1 / (mean + np.log(xmin / (xmin - 0.5))) == pytest.approx(limit, abs=1e-5)
    assert exponent(float(xmin), mean, 0.0, 0.0) == pytest.approx(2.5, rel=1e-11)


@pytest.mark.parametrize(
    ("n", "alpha", "mean", "spread"), [(50, 2.5, 2.530612, 0.220925), (10, 2.0, 2.111111, 0.392837)]
)
def test_exact_law_of_the_continuous_exponent(n, alpha, mean, spread):
    """alpha_hat - 1 = n (alpha - 1)/Gamma(n): mean (n alpha - 1)/(n - 1), sd (alpha - 1) n/((n - 1) sqrt(n - 2)).

    From the real bootstrap of a sample whose fit is exactly alpha; 40 000 replicates, five standard errors.
    """
    logs = -np.log((np.arange(n) + 0.5) / n)
    sizes = np.exp(logs / logs.mean() / (alpha - 1))
    law = law_of(Sample.of_sizes(sizes), Options(xmin=1.0, min_tail=2))
    fit = law.fit()
    assert fit.alpha == pytest.approx(alpha, rel=1e-12)
    from monitor.tail.kernels.chance import key_of

    drawn = law.replicate(fit, "model", key_of(5, n))(0, 40_000, False).alpha
    assert drawn.mean() == pytest.approx(mean, abs=5 * spread / 200)
    assert drawn.std() == pytest.approx(spread, rel=0.06)
    assert stats.kstest(2 * n * (alpha - 1) / (drawn - 1), "chi2", args=(2 * n,)).pvalue > 1e-4


def test_exact_interval_from_the_chi_square_table():
    """chi2(100) at 2.5 and 97.5 %: 74.2219, 129.5612 (any table); n 50, alpha_hat 2.5."""
    assert alpha_exact(2.5, 50) == pytest.approx((2.11333, 2.94342), abs=5e-6)
