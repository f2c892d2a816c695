"""Levels, limits, the largest event and the top share: brute force, second implementations, coverage."""

import mpmath
import numpy as np
import pytest
from scipy import stats
from scipy.special import zeta

from monitor.tail.judgement import Options, Rival
from monitor.tail.largest import expected_largest
from monitor.tail.level import finite, largest, levels, limit, period_text, top_share
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import Draws, TailFit
from monitor.tail.tails import Tails, order_limits
from monitor.tail.top_share import top_share_of
from monitor.tail.whole_law import log_zeta, whole_quantile
from storage.grid import cell_of, edges


def fitted(sample, xmin, *, counting="measured", alpha=None):
    start = int(np.searchsorted(sample.sizes, xmin))
    n_tail = int(sample.counts[start:].sum())
    if alpha is None:
        logs = np.log(sample.sizes[start:]) - np.log(xmin)
        alpha = 1 + n_tail / np.sum(sample.counts[start:] * logs)
    return TailFit(
        alpha=alpha, alpha_se=(alpha - 1) / n_tail**0.5, xmin=xmin, start=start, n_tail=n_tail, n=sample.n,
        ks_distance=0.01, counting=counting,
    )  # fmt: skip


def mixed_sample(rng, n, *, alpha=2.5, xmin=10.0, share=0.3):
    body = rng.uniform(1.0, xmin, n)
    tail = xmin * (1 - rng.random(n)) ** (-1 / (alpha - 1))
    return Sample.of_sizes(np.where(rng.random(n) < share, tail, body))


def draws_of(rng, fit, r=400):
    n_tail = rng.binomial(fit.n, fit.share, r)
    slope = (fit.alpha - 1) * n_tail / rng.gamma(n_tail)  # the exact law of the estimator at a given xmin
    return Draws(alpha=1 + slope, xmin=np.full(r, fit.xmin), n_tail=n_tail, n=fit.n)


@pytest.fixture(scope="module")
def case():
    rng = np.random.default_rng(31)
    sample = mixed_sample(rng, 4000)
    fit = fitted(sample, float(sample.sizes[sample.sizes >= 10.0][0]))
    return sample, fit, draws_of(rng, fit)


def test_level_is_the_quantile_of_the_fitted_tail(case):
    sample, fit, draws = case
    for level in levels(sample, fit, draws, Options(one_in=(10, 1000, 10**7)), (), True):
        chance = 1 / level.one_in / fit.share
        assert level.size == pytest.approx(stats.pareto.isf(chance, fit.alpha - 1, scale=fit.xmin), rel=1e-12)
        assert level.interval[0] < level.size < level.interval[1]
        assert level.beyond_data == pytest.approx(level.size / sample.sizes[-1])
        assert level.by_rival is None


def test_level_below_the_tail_is_the_samples_own(case):
    sample, fit, draws = case
    (level,) = levels(sample, fit, draws, Options(one_in=(2,)), (), True)
    assert level.size == pytest.approx(np.quantile(np.repeat(sample.sizes, sample.counts), 0.5), rel=1e-2)
    assert level.interval[0] < level.size < level.interval[1] < fit.xmin


def test_second_opinion_only_when_the_power_law_is_not_plausible(case):
    sample, fit, draws = case
    rival = Rival(
        tail="exponential", log_likelihood_ratio=-5.0, z=-3.0, p=0.01, favours="rival", parameters={"scale": 7.0}
    )
    (level,) = levels(sample, fit, draws, Options(one_in=(1000,)), (rival,), False)
    assert level.by_rival["tail"] == "exponential"
    assert level.by_rival["size"] == pytest.approx(fit.xmin + 7 * np.log(1000 * fit.share), rel=1e-9)
    for plausible in (True, None):
        assert levels(sample, fit, draws, Options(one_in=(1000,)), (rival,), plausible)[0].by_rival is None


def test_delta_method_and_replicates_agree(case):
    sample, fit, draws = case
    options = Options(one_in=(10_000,))
    by_draws = levels(sample, fit, draws, options, (), True)[0].interval
    by_delta = levels(sample, fit, None, options, (), True)[0].interval
    assert np.log(by_draws) == pytest.approx(np.log(by_delta), abs=0.1)


def test_level_interval_covers_the_true_level():
    # 300 samples of 2000 events at a known xmin: the 95 % interval holds the true level in .95; with sd .0126 the
    # bounds .91 and .985 are passed by chance in fewer than 1 run in 300 (seed fixed).
    rng = np.random.default_rng(32)
    true = 10.0 * (10_000 * 0.3) ** (1 / 1.5)
    held = {"draws": 0, "delta": 0}
    for _ in range(300):
        n_tail = int(rng.binomial(2000, 0.3))
        fit = TailFit(
            alpha=1 + 1.5 * n_tail / rng.gamma(n_tail), alpha_se=0.0, xmin=10.0, start=0, n_tail=n_tail, n=2000,
            ks_distance=0.01, counting="measured",
        )  # fmt: skip
        fit = TailFit(
            **{name: getattr(fit, name) for name in fit.__slots__} | {"alpha_se": (fit.alpha - 1) / n_tail**0.5}
        )
        sample = Sample(np.array([1.0, 10.0, 20.0]), np.array([2000 - n_tail, n_tail - 1, 1]))
        for name, draws in (("draws", draws_of(rng, fit)), ("delta", None)):
            low, high = levels(sample, fit, draws, Options(one_in=(10_000,)), (), True)[0].interval
            held[name] += low <= true <= high
    assert 0.91 * 300 <= held["draws"] <= 0.985 * 300
    assert 0.91 * 300 <= held["delta"] <= 0.985 * 300


def test_order_limits_are_the_tenth_and_the_391st_of_400():
    values = np.random.default_rng(33).permutation(np.arange(1.0, 401.0))
    assert order_limits(values) == (10.0, 391.0)
    assert order_limits(np.arange(1.0, 40.0)) == (1.0, 39.0)
    assert order_limits(np.arange(38.0)) == (None, None)


def test_replicates_that_say_nothing_widen_the_limits():
    values = np.append(np.full(20, np.nan), np.arange(1.0, 381.0))
    assert order_limits(values, missing=(-5.0, 3.0)) == (-5.0, 372.0)
    assert order_limits(values, missing=(None, None)) == (None, None)
    values[:15] = 200.0  # 5 of 400: fewer than 1 in 40
    assert order_limits(values, missing=(-5.0, 3.0))[0] > 0


@pytest.mark.parametrize(("alpha", "xmin"), [(2.5, 5), (1.6, 1), (4.0, 30), (3.0, 1000)])
def test_whole_quantile_is_the_smallest_integer(alpha, xmin):
    for chance in (0.9, 0.5, 0.01, 1e-5, 1e-8):
        x = float(whole_quantile(alpha, xmin, np.log(chance)))
        assert zeta(alpha, x + 1) <= chance * zeta(alpha, xmin) * (1 + 1e-12)
        assert zeta(alpha, x) > chance * zeta(alpha, xmin) * (1 - 1e-12)


def test_log_zeta_with_mpmath():
    with mpmath.workdps(40):
        for alpha, q in [(2.5, 5), (2.5, 400), (1.05, 3e6), (1.95, 1e9), (60.0, 12)]:
            assert float(log_zeta(alpha, q)) == pytest.approx(float(mpmath.log(mpmath.zeta(alpha, q))), abs=1e-12)
        # mpmath's own zeta(30, 700) is off in the tenth digit: sum the terms.
        plain = mpmath.log(mpmath.fsum(mpmath.mpf(k) ** -30 for k in range(700, 4000)))
        assert float(log_zeta(30.0, 700.0)) == pytest.approx(float(plain), abs=1e-12)


def test_whole_level_and_chance_belong_together():
    tails = Tails(np.array([2.3]), np.array([7.0]), np.array([0.2]), "whole")
    size = float(np.exp(tails.log_size(1e-4)[0]))
    assert size == pytest.approx(round(size), abs=1e-6)
    assert tails.chance(round(size))[0] <= 1e-4 < tails.chance(round(size) - 1)[0]
    # P(X > 50) = share zeta(alpha, 51) / zeta(alpha, xmin); values between integers change nothing.
    assert tails.chance(50.0)[0] == pytest.approx(0.2 * zeta(2.3, 51) / zeta(2.3, 7), rel=1e-12)
    assert tails.chance(50.7)[0] == tails.chance(50.0)[0]


def test_limit_by_hand(case):
    sample, fit, draws = case
    options = Options(limit=200.0, period_days=30.0, events_per_day=100.0, limit_at_most=3.0)
    found = limit(sample, fit, draws, options)
    expected = 3000 * fit.share * (200.0 / fit.xmin) ** (1 - fit.alpha)
    assert found.expected == pytest.approx(expected, rel=1e-12)
    assert found.chance == pytest.approx(1 - np.exp(-expected), rel=1e-12)
    assert found.chance_of_more == pytest.approx(stats.poisson.sf(3, expected), rel=1e-10)
    assert found.interval[0] < found.chance < found.interval[1]
    assert found.period == "30d"
    by_delta = limit(sample, fit, None, options)
    assert by_delta.interval == pytest.approx(found.interval, abs=0.03)


def test_limit_below_the_tail_is_judged_by_the_samples_share(case):
    sample, fit, draws = case
    found = limit(sample, fit, draws, Options(limit=4.0, period_days=0.5, events_per_day=2.0))
    share = sample.counts[sample.sizes > 4.0].sum() / sample.n
    assert found.expected == pytest.approx(share)
    exact = stats.binomtest(int(share * sample.n + 0.5), sample.n).proportion_ci(0.95, method="exact")
    assert found.interval == pytest.approx((1 - np.exp(-exact.low), 1 - np.exp(-exact.high)), rel=1e-9)
    assert found.period == "12h"


@pytest.mark.parametrize("missing", ["limit", "period_days", "events_per_day"])
def test_no_limit_without_all_it_needs(case, missing):
    sample, fit, draws = case
    given = {"limit": 200.0, "period_days": 30.0, "events_per_day": 100.0} | {missing: None}
    assert limit(sample, fit, draws, Options(**given)) is None


@pytest.mark.parametrize(
    ("days", "text"), [(30, "30d"), (1, "1d"), (0.25, "6h"), (1.5, "1.5d"), (1 / 96, "15m"), (2e-4, "17.28s")]
)
def test_period_text(days, text):
    assert period_text(days) == text


def test_median_and_mean_of_the_largest_by_simulation():
    # The largest of 50 events, a third of them in the tail: 40 000 maxima; the mean has a standard error of about 1 %.
    rng = np.random.default_rng(34)
    sample = mixed_sample(rng, 3000, alpha=4.0)
    fit = fitted(sample, float(sample.sizes[sample.sizes >= 10.0][0]))
    u = rng.random((40_000, 50))
    body = np.repeat(sample.sizes[: fit.start], sample.counts[: fit.start])
    x = np.where(
        u < fit.share, fit.xmin * np.maximum(u / fit.share, 1e-300) ** (-1 / (fit.alpha - 1)), rng.choice(body, u.shape)
    )
    maxima = x.max(axis=1)
    found = largest(sample, fit, None, Options(one_in=(50,)), alpha_interval=(3.7, 4.3))
    assert found.median == pytest.approx(np.median(maxima), rel=0.02)
    assert found.expected == pytest.approx(maxima.mean(), rel=0.03)
    assert found.median == pytest.approx(fit.xmin * (50 * fit.share / np.log(2)) ** (1 / (fit.alpha - 1)), rel=0.01)


@pytest.mark.parametrize(("alpha", "share_below"), [(3.2, 0), (2.4, 0), (3.5, 400)])
def test_mean_of_the_largest_whole_size_by_plain_sums(alpha, share_below):
    sample = (
        Sample(np.array([2.0, 5.0]), np.array([share_below, 100])) if share_below else Sample.of_sizes(np.full(9, 5.0))
    )
    start = 1 if share_below else 0
    fit = TailFit(
        alpha=alpha,
        alpha_se=0.1,
        xmin=5.0,
        start=start,
        n_tail=100,
        n=100 + share_below,
        ks_distance=0.0,
        counting="whole",
    )
    x = np.arange(5, 4_000_000.0)
    survival = fit.share * zeta(alpha, x) / zeta(alpha, 5)  # P(X >= x)
    at_least = -np.expm1(30 * np.log1p(-np.minimum(survival, 1 - 1e-16)))
    by_sums = 5 * at_least[0] + at_least[1:].sum() + 2.0 * (1 - at_least[0])
    by_sums += x[-1] * at_least[-1] / (alpha - 2)  # the rest, a power of x by then
    assert expected_largest(sample, fit, 30) == pytest.approx(by_sums, rel=1e-6)


def test_no_mean_and_no_upper_end_for_heavy_tails(case):
    sample, fit, draws = case
    heavy = fitted(sample, fit.xmin, alpha=1.9)
    found = largest(sample, heavy, None, Options(), alpha_interval=(1.8, 2.0))
    assert found.expected is None
    assert found.interval[0] is not None
    assert found.interval[1] is None
    assert top_share(heavy, None, alpha_interval=(1.8, 2.0)).share is None
    open_end = largest(sample, fit, draws, Options(), alpha_interval=(1.98, 2.9))
    assert open_end.expected is not None
    assert open_end.interval[1] is None
    assert top_share(fit, None, alpha_interval=(1.98, 2.9)).interval[1] is None


def test_top_share_of_the_tail(case):
    _, fit, draws = case
    found = top_share(fit, draws, alpha_interval=(2.4, 2.6))
    # Second way: mean above the 80 % point over the mean, by the quantile function of scipy's Pareto law.
    law = stats.pareto(fit.alpha - 1)
    above = law.expect(lambda x: x, lb=law.isf(0.2))
    assert found.share == pytest.approx(above / law.mean(), rel=1e-6)
    assert found.interval[0] < found.share < found.interval[1]


def test_top_share_of_whole_sizes_by_plain_sums():
    x = np.arange(2.0, 3_000_000.0)
    weights = x**-3.5 / zeta(3.5, 2)
    at = int(np.argmax(1 - np.cumsum(weights) <= 0.2))
    above = weights[at + 1 :].sum()
    held = np.sum(weights[at + 1 :] * x[at + 1 :]) + (0.2 - above) * x[at]
    ours = top_share_of(np.array([3.5]), np.array([2.0]), 0.2, "whole")[0]
    assert ours == pytest.approx(held / np.sum(weights * x), rel=1e-8)


@pytest.mark.parametrize(
    ("interval", "mean", "variance"),
    [
        ((1.5, 1.9), False, False), ((1.9, 2.1), None, False), ((2.1, 2.9), True, False), ((2.5, 3.2), True, None),
        ((3.1, 3.5), True, True), ((None, None), None, None), (None, None, None),
    ],
)  # fmt: skip
def test_finite_moments(interval, mean, variance):
    found = finite(interval)
    assert (found.mean, found.variance) == (mean, variance)


def test_a_level_that_doubles_cannot_hold_is_none():
    sample = Sample.of_sizes(np.array([1.0, 1e100, 1e200, 1e300]))
    fit = fitted(sample, 1.0)
    (level,) = levels(sample, fit, None, Options(one_in=(1000,)), (), True)
    assert level.size is None
    assert level.beyond_data is None
    assert largest(sample, fit, None, Options(one_in=(1000,)), alpha_interval=None).median is None


def test_whole_sizes_on_the_grid_begin_at_the_first_integer_of_the_cell():
    # On the grid xmin is the edge of a cell, 6.9977 for the cell of 7: all figures must be those of xmin 7.
    edge = float(edges(cell_of(np.array([7.0])))[0])
    assert 6.9 < edge < 7
    sample = Sample.of_sizes(np.arange(7.0, 60.0))
    options = Options(one_in=(100, 5000), limit=90.0, period_days=1.0, events_per_day=50.0)
    on_edge, exact = (
        fitted(sample, 7.0, counting="whole", alpha=2.6),
        TailFit(
            alpha=2.6, alpha_se=1.6 / 53**0.5, xmin=edge, start=0, n_tail=53, n=53, ks_distance=0.01, counting="whole"
        ),
    )
    first, second = (
        (
            levels(sample, fit, None, options, (), True),
            limit(sample, fit, None, options),
            expected_largest(sample, fit, 99),
        )
        for fit in (on_edge, exact)
    )
    assert first[0][1].size == second[0][1].size == round(first[0][1].size)
    assert first[1].expected == pytest.approx(second[1].expected, rel=1e-12)
    assert first[2] == pytest.approx(second[2], rel=1e-9)
    assert top_share(on_edge, None, alpha_interval=None).share == top_share(exact, None, alpha_interval=None).share


@pytest.mark.parametrize(
    ("alpha", "q"), [(110.0, 3000.0), (748.2, 444.0), (907.4, 445.0), (5000.0, 2.0), (1200.0, 5e4)]
)
def test_log_zeta_where_zeta_is_no_double_agrees_with_mpmath(alpha, q):
    with mpmath.workdps(40):
        exact = mpmath.log(mpmath.fsum((mpmath.mpf(q) + k) ** (-mpmath.mpf(alpha)) for k in range(4000)))
    assert float(log_zeta(np.array([alpha]), np.array([q]))[0]) == pytest.approx(float(exact), rel=1e-13)
