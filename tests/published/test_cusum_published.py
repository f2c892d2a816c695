"""Run lengths of the exponential CUSUM against closed forms, independently computed tables, and simulation."""

from __future__ import annotations

from math import exp, log

import numpy as np
import pytest

from monitor.watch.cusum import Cusum, chart_for, reference, run_length


def test_closed_form_for_small_intervals():
    # S. Vardeman & D. Ray, Technometrics 27 (1985) 145: for h <= k the run length is e^h (e^k - h + 1) - 1.
    for k, h in ((2.0, 1.5), (1.0, 1.0), (0.7, 0.1), (3.0, 0.0)):
        assert run_length(Cusum(k, h, "up")) == pytest.approx(exp(h) * (exp(k) - h + 1) - 1, rel=1e-13)
    assert run_length(Cusum(2.0, 1.5, "up")) == pytest.approx(29.874607, abs=5e-7)


@pytest.mark.parametrize(("mean", "length"), [(1.0, 41.0556), (1.5, 11.0210), (2.0, 6.5003), (3.0, 3.8750)])
def test_spot_values(mean, length):
    # Computed independently by a Markov chain; 180 000 simulated runs gave 41.21 +- .09 and 11.02 +- .02.
    assert run_length(Cusum(1.0, 5.0, "up"), mean) == pytest.approx(length, abs=6e-5)


@pytest.mark.parametrize(
    ("theta", "k", "charts"),
    [
        (1.5, 1.216395, {200: (7.0934, 21.68), 500: (9.4977, 29.84), 1000: (11.4261, 36.52)}),
        (2.0, 1.386294, {200: (5.6857, 10.05), 500: (7.4036, 12.80), 1000: (8.7425, 14.97)}),
        (3.0, 1.647918, {200: (4.5823, 4.877), 500: (5.9115, 5.853), 1000: (6.9331, 6.606)}),
    ],
)
def test_charts_for_a_shift(theta, k, charts):
    # Reference value theta ln theta / (theta - 1) (G. Moustakides 1986); intervals and run lengths computed
    # independently by solving the integral equation numerically.
    assert reference(theta) == pytest.approx(k, abs=6e-7)
    for in_control, (h, after) in charts.items():
        chart = chart_for(theta, in_control)
        assert chart.h == pytest.approx(h, abs=6e-5)
        assert run_length(chart, theta) == pytest.approx(after, abs=6e-3)


def _simulated(chart, mean, runs, rng):
    """Mean and standard error of simulated run lengths."""
    level, lengths, time = np.zeros(runs), np.zeros(runs), 0
    open_runs = np.ones(runs, bool)
    sign = 1.0 if chart.way == "up" else -1.0
    while open_runs.any():
        time += 1
        level = np.maximum(0.0, level + sign * (rng.standard_exponential(runs) * mean - chart.k))
        done = open_runs & (level > chart.h)
        lengths[done] = time
        open_runs &= ~done
    return lengths.mean(), lengths.std() / np.sqrt(runs)


@pytest.mark.parametrize(
    ("chart", "mean"),
    [
        (Cusum(0.9, 4.0, "down"), 1.0),
        (Cusum(0.8, 2.5, "down"), 0.6),
        (Cusum(0.5, 0.3, "down"), 1.0),
        (Cusum(1.05, 6.0, "up"), 1.2),
    ],
)
def test_both_directions_against_simulation(chart, mean):
    # Second implementation: the chart itself, 4 000 runs. 4.5 standard errors: 1 in 150 000 for another seed.
    found, error = _simulated(chart, mean, 4000, np.random.default_rng(5))
    assert run_length(chart, mean) == pytest.approx(found, abs=4.5 * error)


def test_long_charts_keep_their_digits():
    # The sums cancel by tens of orders of magnitude here; plain doubles would be worthless. mean run length grows
    # like exp(h * root), root > 0 the solution of E exp(root (z - k)) = 1 (Lundberg's exponent).
    theta = 1.1
    one, two = chart_for(theta, 1e3), chart_for(theta, 1e6)
    root = (log(1e6) - log(1e3)) / (two.h - one.h)
    assert exp(-root * reference(theta)) / (1 - root) == pytest.approx(1.0, abs=1e-3)
    assert run_length(two, 1.0) == pytest.approx(1e6, rel=1e-8)


def test_impossible_charts_are_refused():
    for chart, mean in ((Cusum(0.0, 1.0, "up"), 1.0), (Cusum(1.0, -1.0, "up"), 1.0), (Cusum(1.0, 1.0, "up"), 0.0)):
        with pytest.raises(ValueError, match="CUSUM needs"):
            run_length(chart, mean)
