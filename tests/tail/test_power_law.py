"""The law against scipy's Pareto and zeta distributions."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats

from monitor.tail.power_law import PowerLaw

SIZES = np.array([0.5, 2.0, 2.5, 3.0, 17.0, 4e5])


def test_measured_sizes_against_pareto():
    law, reference = PowerLaw(2.5, 2.0), stats.pareto(1.5, scale=2.0)
    np.testing.assert_allclose(law.pdf(SIZES), reference.pdf(SIZES), rtol=1e-13)
    np.testing.assert_allclose(law.sf(SIZES), reference.sf(SIZES), rtol=1e-13)
    chances = np.array([1.0, 0.3, 1e-9])
    np.testing.assert_allclose(law.isf(chances), reference.isf(chances), rtol=1e-12)


def test_whole_sizes_against_zipf():
    law, reference = PowerLaw(2.5, 1.0, "whole"), stats.zipf(2.5)
    k = np.array([1, 2, 3, 17, 250])
    np.testing.assert_allclose(law.pdf(k), reference.pmf(k), rtol=1e-12)
    np.testing.assert_allclose(law.sf(k), reference.sf(k - 1), rtol=1e-10)
    assert law.pdf(np.array([1.5, 0.0])).tolist() == [0.0, 0.0]
    for chance in (0.5, 0.1, 1e-3):
        assert law.isf(np.array([chance]))[0] == reference.isf(chance)


def test_survival_from_five_on():
    """P(X >= x) at alpha 2.5, xmin 5, by mpmath."""
    law = PowerLaw(2.5, 5.0, "whole")
    values = {6: 0.74191, 8: 0.46700, 10: 0.32793, 20: 0.11166, 100: 0.00969}
    assert law.sf(np.array(list(values))) == pytest.approx(list(values.values()), abs=5e-6)


def test_a_size_beyond_doubles_is_infinite():
    assert PowerLaw(1.01, 1.0).isf(np.array([1e-9]))[0] == np.inf
