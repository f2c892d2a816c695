"""Levels and shares without a law: exact binomial limits, coverage on tied and untied data, the grid."""

import numpy as np
import pytest
from scipy import stats

from monitor.tail.empirical import empirical_interval, empirical_levels, empirical_size, share_above
from monitor.tail.sample import Sample
from storage.grid import cell_of


def on_grid(sizes):
    cells, counts = np.unique(cell_of(sizes), return_counts=True)
    return Sample.of_cells(cells, counts)


def test_size_is_passed_by_at_most_one_in_m():
    sample = Sample.of_sizes(np.arange(1.0, 1001.0))
    assert empirical_size(sample, 1 / 10) == 900.0
    assert empirical_size(sample, 1 / 1000) == 999.0
    tied = Sample(np.array([1.0, 2.0, 3.0]), np.array([90, 9, 1]))
    assert empirical_size(tied, 0.1) == 1.0
    assert empirical_size(tied, 0.0999) == 2.0


@pytest.mark.parametrize(("n", "chance"), [(100, 0.1), (1000, 0.01), (5000, 0.3), (40, 0.5)])
def test_limits_are_binomial(n, chance):
    # Second implementation by scipy's binomial quantiles (Conover, section 3.2), sizes 1..n so that size = rank.
    low, high = empirical_interval(Sample.of_sizes(np.arange(1.0, n + 1)), chance)
    law = stats.binom(n, chance)
    above = max(a for a in range(n + 1) if law.cdf(a - 1) <= 0.025)
    below = min(b for b in range(1, n + 2) if law.sf(b - 1) <= 0.025)
    assert high == (None if above == 0 else n + 1 - above)
    assert low == n + 1 - below


@pytest.mark.parametrize("whole", [False, True])
def test_limits_cover_at_least_95_percent(whole):
    # 2000 samples; exact coverage is at least .95, its sd .005: below .935 by chance once in 1000 runs (seed fixed).
    rng = np.random.default_rng(41)
    held = 0
    for _ in range(2000):
        x = rng.pareto(1.5, 300) + 1
        x = np.ceil(3 * x) if whole else x
        true = 20 ** (1 / 1.5)
        true = np.ceil(3 * true) if whole else true
        low, high = empirical_interval(Sample.of_sizes(x), 1 / 20)
        held += low <= true <= high
    assert held >= 0.935 * 2000
    if not whole:
        assert held <= 0.985 * 2000  # and not by being as wide as the data


def test_reach_of_the_data():
    sample = Sample.of_sizes(np.arange(1.0, 1001.0))
    reached, edge, beyond = empirical_levels(sample, (100, 1000, 2000))
    assert None not in reached.interval
    assert edge.size == 999.0
    assert edge.interval[1] is None  # fewer than 3.7 m events
    assert beyond.size is None
    assert beyond.interval[0] is not None
    assert beyond.beyond_data is None
    assert empirical_levels(Sample.of_sizes(np.arange(1.0, 3690.0)), (1000,))[0].interval[1] is not None


def test_grid_interpolates_inside_the_cell():
    x = np.random.default_rng(42).pareto(1.2, 200_000) + 1
    exact, grid = Sample.of_sizes(x), on_grid(x)
    for chance in (0.5, 0.1, 0.013, 1e-3):
        assert empirical_size(grid, chance) == pytest.approx(empirical_size(exact, chance), rel=2e-3)
        low, high = empirical_interval(exact, chance)
        grid_low, grid_high = empirical_interval(grid, chance)
        assert grid_low <= low < high < grid_high
        assert (grid_low, grid_high) == pytest.approx((low, high), rel=0.0046)
    for size in (1.5, 7.77, 300.0):
        assert share_above(grid, size).share == pytest.approx(share_above(exact, size).share, rel=0.01, abs=2e-5)


@pytest.mark.parametrize(("above", "n"), [(0, 20), (3, 50), (20, 20)])
def test_share_limits_are_clopper_and_pearsons(above, n):
    sizes = np.concatenate([np.full(n - above, 1.0), np.full(above, 9.0)])
    found = share_above(Sample.of_sizes(sizes), 5.0)
    exact = stats.binomtest(above, n).proportion_ci(0.95, method="exact")
    assert (found.share, found.low, found.high) == pytest.approx((above / n, exact.low, exact.high), abs=1e-12)


def test_share_passes_strictly():
    assert share_above(Sample.of_sizes(np.array([1.0, 2.0, 3.0, 4.0])), 2.0).share == 0.5


def test_a_thousand_million_events_cost_nothing():
    sample = Sample(np.array([1.0, 2.0, 5.0, 900.0]), np.array([9 * 10**8, 10**8 - 2000, 1900, 100]))
    (level,) = empirical_levels(sample, (1_000_000,))
    assert level.size == 5.0
    assert level.interval == (5.0, 5.0)
