"""Self-starting scores: exactly standard exponential, whatever the rate and however short the past."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.watch.mixture import LOG_THETAS
from monitor.watch.scores import Past, self_starting


def test_scores_are_exactly_exponential_and_uncorrelated():
    # 8 000 streams of 50 values with unknown scales, 392 000 scores. Kolmogorov: sqrt(n) D < 1.95 fails by chance in
    # 1 of 1 000 seeds; the seed is fixed.
    rng = np.random.default_rng(21)
    rows = [self_starting(rng.standard_exponential(50) * rng.uniform(0.1, 9.0), Past()).scores[1:] for _ in range(8000)]
    z = np.concatenate(rows)
    u = np.sort(-np.expm1(-z))
    steps = np.arange(u.size + 1) / u.size
    distance = max((steps[1:] - u).max(), (u - steps[:-1]).max())
    assert np.sqrt(u.size) * distance < 1.95
    table = np.array(rows)
    for lag in (1, 2, 10):
        assert abs(np.corrcoef(table[:, :-lag].ravel(), table[:, lag:].ravel())[0, 1]) < 4.0 / np.sqrt(z.size)


@pytest.mark.parametrize(("alpha", "xmin", "allowed"), [(2.5, 5, 0.01), (2.5, 10, 0.003), (2.1, 10, 0.002)])
def test_factors_of_whole_sizes_have_mean_one_but_for_a_little(alpha, xmin, allowed):
    # y = ln(x / (xmin - 1/2)) under the discrete law, by summing the law itself (the half-integer shift is CSN's
    # approximation); scores see only y over its mean.
    x = np.arange(xmin, 2_000_000, dtype=float)
    weight = np.append(x**-alpha, (x[-1] + 0.5) ** (1 - alpha) / (alpha - 1))
    y = np.log(np.append(x, x[-1]) / (xmin - 0.5))
    rest = 1 / (alpha - 1)
    mean = (weight @ y + weight[-1] * rest) / weight.sum()
    for log_theta in LOG_THETAS:
        slope = -np.expm1(-log_theta) / mean
        # Beyond the sum the law is a power law: y is exponential there, with mean 1/(alpha - 1) more.
        factor = np.exp(slope * y)
        factor[-1] /= 1 - slope * rest
        assert weight @ factor / weight.sum() / np.exp(log_theta) == pytest.approx(1.0, abs=allowed)


@given(st.lists(st.one_of(st.just(0.0), st.floats(1e-17, 50.0)), max_size=20), st.integers(0, 20))
def test_cutting_into_calls_changes_no_bit(values, cut):
    values = np.array(values)
    start = Past(3.0, 1.7)
    whole = self_starting(values, start)
    first = self_starting(values[:cut], start)
    second = self_starting(values[cut:], first.past)
    assert np.concatenate((first.scores, second.scores)).tolist() == whole.scores.tolist()
    assert second.past == whole.past


def test_no_past_a_known_past_and_a_held_one():
    values = np.array([2.0, 1.0])
    fresh = self_starting(values, Past())
    assert fresh.counted.tolist() == [False, True]
    assert fresh.scores[1] == pytest.approx(np.log(1.5))
    known = self_starting(values, Past(1.0, 0.5, known=True))
    assert known.scores.tolist() == [4.0, 2.0]
    assert known.past == Past(1.0, 0.5, known=True)
    held = self_starting(values, Past(10.0, 10.0), hold=True)
    assert held.scores == pytest.approx(10 * np.log1p(values / 10))
    assert held.past == Past(10.0, 10.0)
