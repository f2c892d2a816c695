"""Sequential decisions about p: the promised risks, and the stopping counts that were worked out beforehand."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from monitor.tail.stopping import FLOOR, first_decision, interval_at_any_stop, log_mixture


def test_the_mixture_is_a_martingale():
    """Its mean over all outcomes of m trials with chance p = threshold is exactly 1."""
    for threshold in (0.05, 0.1, 0.5):
        for m in (1, 7, 60):
            b = np.arange(m + 1)
            mean = np.sum(stats.binom.pmf(b, m, threshold) * np.exp(log_mixture(b, np.full(m + 1, m), threshold)))
            assert mean == pytest.approx(1.0, rel=1e-10)


@pytest.mark.parametrize(("p", "wrong"), [(0.13, "low"), (0.07, "high")])
def test_the_wrong_side_is_hardly_ever_taken(p, wrong):
    """2000 bootstraps of 2500: the risk is 1e-3, so more than 9 wrong ones have a chance below 1e-4."""
    rng = np.random.default_rng(9)
    bad = 0
    for _ in range(2000):
        verdicts = rng.random(2500) < p
        m = first_decision(verdicts, 0.1)
        if m is not None:
            side = "high" if verdicts[:m].mean() > 0.1 else "low"
            bad += side == wrong
    assert bad <= 9


@pytest.mark.parametrize(("p", "mean"), [(0.0, 200), (0.5, 200), (0.05, 502), (0.2, 250)])
def test_replicates_needed(p, mean):
    """Of 300 runs; figures from a separate simulation of the rule (there without the floor of 200)."""
    rng = np.random.default_rng(10)
    needed = [first_decision(rng.random(5000) < p, 0.1) or 5000 for _ in range(300)]
    assert min(needed) >= FLOOR
    assert np.mean(needed) == pytest.approx(mean, rel=0.15)


def test_nothing_is_decided_before_the_floor_or_at_the_threshold():
    assert first_decision(np.zeros(FLOOR - 1, bool), 0.1) is None
    assert first_decision(np.zeros(FLOOR, bool), 0.1) == FLOOR
    assert first_decision(np.arange(2500) % 10 == 0, 0.1) is None


def test_the_interval_holds_at_any_stop():
    """Stop where the interval looks worst: it still misses p in at most 5 % of 1000 runs (+ 4 standard errors)."""
    rng = np.random.default_rng(11)
    p, missed = 0.2, 0
    for _ in range(1000):
        counts = np.cumsum(rng.random(400) < p)
        m = np.arange(1, 401)
        outside = (m + 1) * stats.binom.pmf(counts, m, p) <= 0.05
        missed += outside.any()
    assert missed <= 50 + 4 * np.sqrt(1000 * 0.05 * 0.95)


@pytest.mark.parametrize(("successes", "m"), [(0, 200), (3, 200), (200, 200), (655, 2500), (1, 1)])
def test_the_interval_ends_where_its_definition_says(successes, m):
    low, high = interval_at_any_stop(successes, m)
    assert 0 <= low <= successes / m <= high <= 1
    for end, certain in ((low, 0.0), (high, 1.0)):
        if end != certain:
            assert (m + 1) * stats.binom.pmf(successes, m, end) == pytest.approx(0.05, rel=1e-6)


def test_no_replicates_say_nothing():
    assert interval_at_any_stop(0, 0) == (0.0, 1.0)
