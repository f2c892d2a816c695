"""exp and log from basic operations: against numpy's, whose errors are below 1 unit in the last place."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest

from monitor.tail.kernels.arithmetic import exp_apart, exponential, log_ratio, logarithm


def units_off(ours, theirs):
    return np.max(np.abs(np.asarray(ours) - theirs) / np.spacing(np.abs(theirs)))


def test_exp_of_negative_numbers_is_within_two_units_in_the_last_place():
    rng = np.random.default_rng(1)
    x = -np.concatenate([10.0 ** rng.uniform(-18, 2.84, 20_000), [0.0, 1.0, np.log(2), 707.9]])
    assert units_off([exp_apart(v) for v in x], np.exp(x)) <= 2


def test_exp_far_below_is_a_tiny_positive_number():
    assert 0 < exp_apart(-1e9) == exp_apart(-708.0) < 1e-300


def test_exp_of_positive_numbers():
    x = np.linspace(0.001, 709, 3001)
    assert units_off([exponential(v) for v in x], np.exp(x)) <= 6
    assert exponential(800.0) == np.inf


def test_log_is_within_two_units_in_the_last_place_over_all_doubles():
    rng = np.random.default_rng(2)
    x = np.concatenate([10.0 ** rng.uniform(-307, 308, 20_000), 1 + rng.uniform(-0.4, 0.4, 20_000), [5e-324, 1e-310]])
    assert units_off([logarithm(v) for v in x], np.log(x)) <= 2


def test_log_of_one_is_nought():
    assert logarithm(1.0) == 0.0


@pytest.mark.parametrize(("a", "b"), [(2.0**53, 2.0**53 - 2), (10**15 + 1, 10**15), (7, 5), (1e9, 1)])
def test_log_ratio_of_large_neighbours_keeps_its_digits(a, b):
    with mpmath.workdps(40):
        exact = float(mpmath.log(mpmath.mpf(a) / mpmath.mpf(b)))
    assert log_ratio(float(a), float(b)) == pytest.approx(exact, rel=1e-15)
