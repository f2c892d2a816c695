"""Our zeta function against mpmath, and exponents against scipy's root of the same equation."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from numba import njit
from scipy.optimize import brentq

from monitor.tail.kernels.zeta import exponent, fill_series, mean_log, scaled_zeta


@njit
def ours(s, q):
    series = np.empty(9)
    fill_series(s, series)
    return scaled_zeta(s, q, series)


@pytest.mark.parametrize("s", [1.01, 1.5, 2.0, 2.5, 4.7, 12.0, 60.0])
@pytest.mark.parametrize("q", [1.0, 2.0, 7.0, 40.0, 1e4])
def test_scaled_zeta_agrees_with_mpmath(s, q):
    # zeta(60, 1e4) is about 1e-238, and mpmath counts digits after the point.
    with mpmath.workdps(300):
        exact = float(mpmath.mpf(q) ** mpmath.mpf(s) * mpmath.zeta(mpmath.mpf(s), mpmath.mpf(q)))
    assert ours(s, q) == pytest.approx(exact, rel=2e-14 if s > 20 else 2e-15)


@pytest.mark.parametrize(("s", "q"), [(2.5, 1.0), (2.5, 5.0), (1.95, 7.0), (3.0, 10.0), (6.0, 900.0)])
def test_mean_and_variance_of_logs_agree_with_mpmath(s, q):
    with mpmath.workdps(40):
        z, z1, z2 = (mpmath.zeta(s, q, k) for k in range(3))
        mean = float(-z1 / z - mpmath.log(q))
        variance = float(z2 / z - (z1 / z) ** 2)
    found = mean_log(s, q)
    assert found.mean == pytest.approx(mean, rel=1e-12)
    assert -found.slope == pytest.approx(variance, rel=1e-11)


@pytest.mark.parametrize("alpha", [1.02, 1.7, 2.5, 5.0, 30.0])
@pytest.mark.parametrize("q", [1.0, 3.0, 19.0, 1e3, 1e12])
def test_the_exponent_solves_its_equation_from_any_start(alpha, q):
    mean = mean_log(alpha, q).mean
    assert exponent(q, mean, 0.0, 0.0) == pytest.approx(alpha, rel=1e-9)
    assert exponent(q, mean, 0.0, 3.3) == pytest.approx(alpha, rel=1e-9)


def test_the_exponent_of_cells_takes_their_inner_variance_into_account():
    within = 3e-6
    root = brentq(lambda s: mean_log(s, 50.0).mean + (s - 2.0) * within - 0.4, 1.5, 9.0, xtol=1e-14)
    assert exponent(50.0, 0.4, within, 0.0) == pytest.approx(root, rel=1e-10)
