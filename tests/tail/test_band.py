"""The band and the rivals' curves of a drawing: the same figures that levels and limits rest on, seen size by size."""

import numpy as np
import pytest
from scipy import stats
from scipy.special import zeta

from monitor.tail.band import survival_band
from monitor.tail.judge import judge, judge_with_draws
from monitor.tail.judgement import Options, Rival
from monitor.tail.rivals import rival_survival
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import Draws
from monitor.tail.tails import Tails


def sample_of(seed=3, whole=False):
    rng = np.random.default_rng(seed)
    sizes = np.concatenate((rng.uniform(1, 10, 1500), 10 * (1 - rng.random(500)) ** (-1 / 1.5)))
    return Sample.of_sizes(np.ceil(3 * sizes) if whole else sizes)


def draws_of(alpha, xmin, n_tail, n=1000):
    return Draws(alpha=np.asarray(alpha, float), xmin=np.asarray(xmin, float), n_tail=np.asarray(n_tail), n=n)


@pytest.mark.parametrize("counting", ["measured", "whole"])
def test_the_band_is_the_interval_of_the_limit(counting):
    """chance of one passage in a period = 1 - exp(-events P(X > limit)): both must come from the same refits."""
    sample = sample_of(whole=counting == "whole")
    for size in (60.0, 400.0, 5000.0):
        options = Options(counting=counting, replicates=400, limit=size, period_days=1.0, events_per_day=2.0)
        found = judge_with_draws(sample, options)
        passed = size + 1 if counting == "whole" else size  # to be at or above size + 1 is to pass size
        band = survival_band(sample, found.draws, np.array([passed]), counting)
        assert found.judgement.limit is not None
        expected = [-np.log1p(-chance) / 2.0 for chance in found.judgement.limit.interval]
        assert [band.low[0], band.high[0]] == pytest.approx(expected, rel=1e-9)


def test_order_statistics_of_refits_that_all_know_the_size():
    share = np.arange(1, 401)
    draws = draws_of(np.full(400, 2.0), np.full(400, 10.0), share)
    band = survival_band(sample_of(), draws, np.array([10.0, 20.0]), "measured")
    assert band.low == pytest.approx([0.010, 0.005])  # the 10th of 400, halved at twice the size
    assert band.high == pytest.approx([0.391, 0.391 / 2])


def test_where_refits_begin_later_the_counted_share_widens_the_band():
    """Exact limits of a share: Clopper & Pearson, Biometrika 26 (1934) 404, here by scipy's beta quantiles."""
    sample = Sample.of_sizes(np.arange(1.0, 101.0))
    draws = draws_of(np.full(400, 2.0), np.full(400, 60.0), np.full(400, 400))
    band = survival_band(sample, draws, np.array([51.0, 60.0]), "measured")
    low, high = stats.beta.ppf(0.025, 50, 51), stats.beta.ppf(0.975, 51, 50)
    assert (band.low[0], band.high[0]) == pytest.approx((low, high), rel=1e-9)  # 50 of 100 are at or above 51
    assert (band.low[1], band.high[1]) == pytest.approx((0.4, 0.4))


def test_no_band_without_enough_refits():
    assert survival_band(sample_of(), None, np.array([10.0]), "measured") is None
    few = draws_of(np.full(38, 2.0), np.full(38, 10.0), np.full(38, 100))
    assert survival_band(sample_of(), few, np.array([10.0]), "measured") is None


def test_whole_sizes_count_from_the_next_integer():
    tails = Tails(np.array([2.0]), np.array([1.0]), np.array([1.0]), "whole")
    expected = [zeta(2, 1), zeta(2, 2), zeta(2, 2), zeta(2, 3)]
    found = [tails.at_or_above(size)[0] * zeta(2, 1) for size in (1.0, 1.5, 2.0, 3.0)]
    assert found == pytest.approx(expected, rel=1e-12)
    assert np.isnan(tails.at_or_above(0.5)[0])


def rival(tail, **parameters):
    return Rival(tail=tail, log_likelihood_ratio=-1.0, z=None, p=0.5, favours="neither", parameters=parameters)


SIZES = np.array([10.0, 12.5, 30.0, 90.0, 400.0])


@pytest.mark.parametrize(
    ("found", "law"),
    [
        (rival("lognormal", mu=1.5, sigma=1.2), stats.lognorm(1.2, scale=np.exp(1.5))),
        (rival("exponential", scale=40.0), stats.expon(scale=40.0)),
        (rival("power law with cut-off", alpha=2.5), stats.pareto(1.5, scale=10.0)),
    ],
)
def test_a_rivals_curve_is_its_law_cut_at_xmin(found, law):
    """Against the distributions of scipy.stats, conditioned on being at or above xmin."""
    assert rival_survival(found, SIZES, 10.0) == pytest.approx(law.sf(SIZES) / law.sf(10.0), rel=1e-8)


def test_a_stretched_exponential_follows_its_formula():
    found = rival_survival(rival("stretched exponential", beta=0.4, slope_at_xmin=1.3), SIZES, 10.0)
    assert found == pytest.approx(np.exp(-1.3 / 0.4 * ((SIZES / 10) ** 0.4 - 1)), rel=1e-8)


def test_a_whole_exponential_is_geometric():
    found = rival_survival(rival("exponential", scale=40.0), SIZES, 10.0, counting="whole")
    assert found == pytest.approx(np.exp(-(np.ceil(SIZES) - 10) / 40), rel=1e-8)


def test_an_undetermined_rival_has_no_curve():
    unknown = Rival(tail="lognormal", log_likelihood_ratio=None, z=None, p=None, favours="not determined")
    assert rival_survival(unknown, SIZES, 10.0) is None


def test_draws_ride_along_and_change_nothing():
    options = Options(replicates=300)
    found = judge_with_draws(sample_of(), options)
    assert found.judgement == judge(sample_of(), options)
    assert found.draws is not None
    few = judge_with_draws(Sample.of_sizes(np.array([1.0, 2.0])), options)
    assert (few.judgement.alpha, few.draws) == (None, None)
