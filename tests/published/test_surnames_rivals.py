"""Rivals on the surnames of the 1990 US census.

Source: Clauset, Shalizi & Newman, SIAM Review 51 (2009) 661, tables 6.1-6.3 [printed values from memory]; the longer
figures were computed with scipy's optimisers and distributions, apart from this project's code.
"""

from pathlib import Path

import numpy as np
import pytest
from scipy import optimize, stats

from monitor.tail.rivals import best_rival, compare_rivals
from monitor.tail.sample import Sample

DATA = Path(__file__).parent / "data" / "surnames_1990_us.csv"
XMIN = 111.9


@pytest.fixture(scope="module")
def surnames() -> Sample:
    table = np.loadtxt(DATA, delimiter=",", skiprows=1)
    sizes = table[:, 0] * 1e-5 * 248709.873
    order = np.argsort(sizes)
    return Sample(sizes[order], table[order, 1].astype(np.int64))


@pytest.fixture(scope="module")
def tail(surnames):
    kept = surnames.sizes >= XMIN
    return np.repeat(surnames.sizes[kept], surnames.counts[kept])


@pytest.fixture(scope="module")
def rivals(surnames, tail):
    alpha = 1 + 1 / np.log(tail / tail.min()).mean()
    found = compare_rivals(surnames, xmin=float(tail.min()), alpha=alpha, counting="measured")
    return {rival.tail: rival for rival in found}


def test_the_tail_is_the_published_one(tail):
    assert len(tail) == 239  # table 6.1
    assert tail.min() == pytest.approx(111.92, abs=0.01)


@pytest.mark.parametrize(
    ("name", "printed_z", "z", "p"),
    [
        ("lognormal", -0.836, -0.8376, 0.4023),
        ("exponential", 2.89, 2.864, 0.0042),
        ("stretched exponential", -0.844, -0.8597, 0.390),
    ],
)
def test_normalised_ratios_of_table_6_2(rivals, name, printed_z, z, p):
    assert rivals[name].z == pytest.approx(printed_z, abs=0.03)
    assert rivals[name].z == pytest.approx(z, abs=1e-3)
    assert rivals[name].p == pytest.approx(p, abs=1e-3)


def test_cut_off_of_table_6_3(rivals):
    rival = rivals["power law with cut-off"]
    assert rival.log_likelihood_ratio == pytest.approx(-1.36, abs=0.005)
    assert rival.log_likelihood_ratio == pytest.approx(-1.3571, abs=1e-4)
    assert rival.p == pytest.approx(0.0995, abs=1e-4)


def test_no_rival_but_the_cut_off_is_favoured(rivals):
    assert rivals["lognormal"].favours == rivals["stretched exponential"].favours == "neither"
    assert rivals["exponential"].favours == "power law"
    assert best_rival(tuple(rivals.values())).tail == "power law with cut-off"


def test_lognormal_parameters_are_those_of_a_general_optimiser(tail, rivals):
    y, start = np.log(tail), np.log(tail.min())

    def minus_log_likelihood(theta):
        mu, sigma = theta[0], np.exp(theta[1])
        return -np.sum(stats.truncnorm.logpdf(y, (start - mu) / sigma, np.inf, loc=mu, scale=sigma))

    close = {"xatol": 1e-7, "fatol": 1e-10}
    best = optimize.minimize(minus_log_likelihood, [4.0, 0.0], method="Nelder-Mead", options=close)
    figures = rivals["lognormal"].parameters
    assert figures["mu"] == pytest.approx(best.x[0], abs=2e-3)
    assert figures["sigma"] == pytest.approx(np.exp(best.x[1]), abs=1e-3)
