"""Goodness of fit at a given xmin is the Kolmogorov-Smirnov test for the exponential law with estimated scale.

ln(size/xmin) is exponential with mean 1/(alpha - 1), so our bootstrap must reproduce the tables of that test.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest

from monitor.tail.gof import Bootstrap
from monitor.tail.judgement import Options
from monitor.tail.sample import Sample
from monitor.tail.scan import find_tail, law_of

REPLICATES = 40_000


def distances(n, replicates=REPLICATES):
    """Distances of the real bootstrap of a sample of n, all of it tail, at a given xmin."""
    sizes = 1.0 / ((np.arange(n) + 0.5) / n)
    options = Options(xmin=1.0, min_tail=2, replicates=replicates)
    law = law_of(Sample.of_sizes(sizes), options)
    from monitor.tail.kernels.chance import key_of

    return law.replicate(law.fit(), "model", key_of(17, n))(0, replicates, False).distance


# M. A. Stephens, Journal of the American Statistical Association 69 (1974) 730, table 1.3 [points from memory]:
# (D - .2/n)(sqrt n + .26 + .5/sqrt n) at 15, 10, 5, 2.5 and 1 %.
STEPHENS = [0.926, 0.990, 1.094, 1.190, 1.308]
# Their true level, by simulation with numpy (60 000 to 1e6 repetitions).
TRUE_LEVEL = {
    5: [0.1465, 0.1004, 0.0496, 0.0235, 0.0080],
    20: [0.1440, 0.0965, 0.0475, 0.0234, 0.0089],
    100: [0.1471, 0.0983, 0.0483, 0.0235, 0.0090],
    400: [0.1503, 0.0995, 0.0486, 0.0230, 0.0089],
}


@pytest.mark.parametrize("n", TRUE_LEVEL)
def test_stephens_points(n):
    modified = (distances(n) - 0.2 / n) * (np.sqrt(n) + 0.26 + 0.5 / np.sqrt(n))
    for point, level in zip(STEPHENS, TRUE_LEVEL[n], strict=True):
        # Four standard errors of ours, one and a half of the table's own.
        slack = 4 * np.sqrt(level * (1 - level) / REPLICATES) + 1.5 * np.sqrt(level * (1 - level) / 60_000)
        assert np.mean(modified >= point) == pytest.approx(level, abs=slack)


# Critical distances at 10, 5, 2.5 and 1 %: statsmodels, `lilliefors` for the exponential law, 1e7 simulations.
CRITICAL = {
    3: [0.5111, 0.5509, 0.5775, 0.6004],
    10: [0.2954, 0.3244, 0.3503, 0.3814],
    50: [0.1371, 0.1509, 0.1635, 0.1787],
    100: [0.0977, 0.1075, 0.1165, 0.1274],
    400: [0.0493, 0.0542, 0.0587, 0.0642],
}


@pytest.mark.parametrize("n", CRITICAL)
def test_critical_distances_to_three_digits(n):
    found = np.quantile(distances(n), [0.9, 0.95, 0.975, 0.99])
    np.testing.assert_allclose(found, CRITICAL[n], rtol=0.012)


def test_two_events_exactly():
    """P(D > d) = 1 + ln(1 - d) for 1/2 <= d <= 1 - 1/e (an integral by hand): 10, 5 and 1 % points."""
    found = distances(2)
    for d, level in ((0.593430, 0.10), (0.613259, 0.05), (0.628423, 0.01)):
        assert 1 + np.log(1 - d) == pytest.approx(level, abs=2e-6)
        assert np.mean(found > d) == pytest.approx(level, abs=4 * np.sqrt(level / REPLICATES))


def test_times_between_failures():
    """Proschan, Technometrics 5 (1963): 12 times, mean 108.083, exponential. D .187288, T* .6600; p .5299 +- .0011 by
    simulation with numpy."""
    hours = np.loadtxt(Path(__file__).parent / "data" / "aircondit_proschan.csv", skiprows=1)
    assert hours.mean() == pytest.approx(108.083, abs=5e-4)
    sample = Sample.of_sizes(np.exp(hours / 100.0))
    options = Options(xmin=1.0, min_tail=2, replicates=20_000, stop_early=False)
    fit = find_tail(sample, options)
    assert fit.alpha - 1 == pytest.approx(100 / 108.0833, rel=1e-6)
    assert fit.ks_distance == pytest.approx(0.187288, abs=5e-7)
    modified = (fit.ks_distance - 0.2 / 12) * (np.sqrt(12) + 0.26 + 0.5 / np.sqrt(12))
    assert modified == pytest.approx(0.6600, abs=5e-5)
    bootstrap = Bootstrap(law_of(sample, options), fit, options)
    assert bootstrap.answer(bootstrap.run()).p == pytest.approx(0.5299, abs=0.016)


def test_replicates_for_a_wanted_accuracy():
    """Clauset, Shalizi & Newman, section 4.1: 1/(4 eps^2) replicates know p to about eps."""
    assert Options().replicates == round(1 / (4 * 0.01**2)) == 2500
