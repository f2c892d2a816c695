"""Rivals against second implementations: scipy's distributions, mpmath's sums, and what must hold whatever the data."""

import mpmath
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy import optimize, stats
from scipy.special import zeta

from monitor.tail.base_measure import reach_of, support, tail_data
from monitor.tail.judgement import Rival
from monitor.tail.rival_laws import LAWS
from monitor.tail.rivals import best_rival, compare_rivals, rival_size
from monitor.tail.sample import Sample
from storage.grid import CELL_WIDTH, cell_of, edges


def on_grid(sizes):
    cells, counts = np.unique(cell_of(np.asarray(sizes)), return_counts=True)
    return Sample.of_cells(cells, counts)


def compared(sizes, counting="measured"):
    sample = sizes if isinstance(sizes, Sample) else Sample.of_sizes(np.asarray(sizes, float))
    xmin = float(sample.sizes[0])
    rivals = compare_rivals(sample, xmin=xmin, alpha=exponent(sample, counting), counting=counting)
    return {rival.tail: rival for rival in rivals}, sample, xmin


def exponent(sample, counting):
    mean = np.average(np.log(sample.sizes) - np.log(sample.sizes[0]), weights=sample.counts)
    if counting == "whole":
        xmin = float(sample.sizes[0])
        found = optimize.minimize_scalar(
            lambda a: np.log(zeta(a, xmin)) + a * (mean + np.log(xmin)), bounds=(1.01, 60), method="bounded",
            options={"xatol": 1e-10},
        )  # fmt: skip
        return found.x
    if sample.cells is not None:
        return 1 + np.log1p(1 / np.average(sample.cells - sample.cells[0], weights=sample.counts)) / CELL_WIDTH
    return 1 + 1 / mean


def lognormal_tail(rng, n, sigma=1.0):
    return np.exp(sigma * np.abs(rng.standard_normal(n)))


def exact_log_likelihoods(name, x, figures):
    """ln f(x | x >= min x) by scipy.stats, one a size."""
    xmin = x.min()
    if name == "lognormal":
        law = stats.lognorm(figures["sigma"], scale=np.exp(figures["mu"]))
        return law.logpdf(x) - law.logsf(xmin)
    if name == "exponential":
        return stats.expon.logpdf(x, loc=xmin, scale=figures["scale"])
    beta, slope = figures["beta"], figures["slope_at_xmin"]
    scale = xmin * (beta / slope) ** (1 / beta)  # survival exp(-(x / scale)^beta) over that at xmin
    law = stats.weibull_min(beta, scale=scale)
    return law.logpdf(x) - law.logsf(xmin)


@pytest.mark.parametrize("name", ["lognormal", "exponential", "stretched exponential"])
def test_ratio_and_z_with_densities_of_scipy(name):
    x = lognormal_tail(np.random.default_rng(11), 700, 0.8)
    rivals, _, xmin = compared(x)
    alpha = 1 + 1 / np.log(x / xmin).mean()
    difference = stats.pareto.logpdf(x, alpha - 1, scale=xmin) - exact_log_likelihoods(name, x, rivals[name].parameters)
    assert rivals[name].log_likelihood_ratio == pytest.approx(difference.sum(), rel=1e-9)
    z = difference.sum() / (np.sqrt(len(x)) * difference.std())
    assert rivals[name].z == pytest.approx(z, rel=1e-9)
    assert rivals[name].p == pytest.approx(2 * stats.norm.sf(abs(z)), rel=1e-8)


@pytest.mark.parametrize("name", ["lognormal", "stretched exponential"])
def test_no_other_parameters_are_likelier(name):
    x = lognormal_tail(np.random.default_rng(12), 400, 0.7)
    best = compared(x)[0][name].parameters
    top = exact_log_likelihoods(name, x, best).sum()
    keys = list(best)
    for angle in np.linspace(0, 2 * np.pi, 16, endpoint=False):
        near = {
            keys[0]: best[keys[0]] * (1 + 1e-3 * np.cos(angle)),
            keys[1]: best[keys[1]] * (1 + 1e-3 * np.sin(angle)),
        }
        assert exact_log_likelihoods(name, x, near).sum() < top


def test_cut_off_with_the_incomplete_gamma_of_mpmath():
    rng = np.random.default_rng(13)
    x = rng.pareto(0.8, 4000) + 1
    x = x[rng.random(len(x)) < np.exp(-(x - 1) / 15)]
    rivals, _, xmin = compared(x)
    rival = rivals["power law with cut-off"]
    alpha, cutoff = rival.parameters["alpha"], rival.parameters["cutoff"]
    # CSN table 2.1: C = cutoff^(alpha - 1) / Gamma(1 - alpha, xmin / cutoff)
    constant = -float(mpmath.log(mpmath.gammainc(1 - alpha, xmin / cutoff))) + (alpha - 1) * np.log(cutoff)
    law = len(x) * constant - alpha * np.log(x).sum() - x.sum() / cutoff
    plain = 1 + 1 / np.log(x / xmin).mean()
    assert rival.log_likelihood_ratio == pytest.approx(
        stats.pareto.logpdf(x, plain - 1, scale=xmin).sum() - law, rel=1e-8
    )
    assert rival.favours == "rival"
    assert rival.p == pytest.approx(stats.chi2.sf(-2 * rival.log_likelihood_ratio, 1), rel=1e-9)


@pytest.mark.parametrize(
    ("xmin", "law"),
    [
        (1, {"b": 0.5, "c": 0.2}), (7, {"b": -1.0, "c": 0.4}), (40, {"b": 1.2, "c": 0.02}), (3, {"b": 0.9, "c": 0.0}),
    ],
)  # fmt: skip
def test_sum_over_integers_with_mpmath(xmin, law):
    # sum over x >= xmin of x^-1 exp(-b y - c y^2), y = ln(x / xmin): the lognormal at the integers; c = 0: Hurwitz
    data = tail_data(Sample.of_sizes(np.array([xmin, xmin * 2.0, xmin * 9.0])), float(xmin), "whole", None)
    nodes = support("whole", float(xmin), reach_of(data, 0.9), first=0.5)
    ours = np.sum(np.exp(nodes.log_weight - law["b"] * nodes.y - law["c"] * nodes.y**2)) * xmin
    if law["c"] == 0:
        assert ours == pytest.approx(float(mpmath.zeta(1 + law["b"], xmin)) * xmin ** (1 + law["b"]), rel=1e-12)
        return
    term = lambda x: mpmath.exp(-(1 + law["b"]) * mpmath.log(x / xmin) - law["c"] * mpmath.log(x / xmin) ** 2)  # noqa: E731
    exact = sum(float(term(x)) for x in range(xmin, xmin + 3000))
    rest = float(mpmath.quad(lambda t: term(mpmath.exp(t)) * mpmath.exp(t), [np.log(xmin + 2999.5), 15, 30, 100]))
    assert ours == pytest.approx(exact + rest, rel=1e-9)


@pytest.mark.parametrize("name", ["lognormal", "exponential", "stretched exponential", "power law with cut-off"])
def test_whole_ratio_by_plain_sums(name):
    rng = np.random.default_rng(14)
    x = np.ceil(4 * lognormal_tail(rng, 600, 0.8))
    rivals, sample, xmin = compared(x, "whole")
    rival = rivals[name]
    theta = next(law for law in LAWS if law.name == name).theta(rival.parameters, xmin)
    law = next(law for law in LAWS if law.name == name)
    all_integers = np.arange(xmin, 200_000)
    weights = law.log_density(theta, np.log(all_integers / xmin)) - np.log(all_integers)
    own = law.log_density(theta, np.log(x / xmin)) - np.log(x) - np.log(np.exp(weights).sum())
    alpha = exponent(sample, "whole")
    ratio = np.sum(-alpha * np.log(x) - np.log(zeta(alpha, xmin)) - own)
    assert rival.log_likelihood_ratio == pytest.approx(ratio, rel=1e-7)


def test_whole_exponential_is_geometric():
    x = 5.0 + np.random.default_rng(15).geometric(0.1, 800) - 1
    x[0] = 5.0
    rival = compared(x, "whole")[0]["exponential"]
    assert np.exp(-1 / rival.parameters["scale"]) == pytest.approx(1 - 1 / (1 + (x - 5).mean()), rel=1e-6)
    assert rival.favours == "rival"


@pytest.mark.parametrize("name", ["lognormal", "exponential", "stretched exponential"])
def test_grid_ratio_from_cell_probabilities_of_scipy(name):
    sample = on_grid(lognormal_tail(np.random.default_rng(16), 3000, 0.5))
    rivals, _, xmin = compared(sample)
    figures = rivals[name].parameters
    low, high = edges(sample.cells), edges(sample.cells + 1)
    if name == "lognormal":
        law = stats.lognorm(figures["sigma"], scale=np.exp(figures["mu"]))
    elif name == "exponential":
        law = stats.expon(scale=figures["scale"])
    else:
        beta = figures["beta"]
        law = stats.weibull_min(beta, scale=xmin * (beta / figures["slope_at_xmin"]) ** (1 / beta))
    own = np.log(law.sf(low) - law.sf(high)) - law.logsf(xmin)
    slope = exponent(sample, "measured") - 1
    power = np.log((low / xmin) ** -slope - (high / xmin) ** -slope)
    assert rivals[name].log_likelihood_ratio == pytest.approx(np.dot(sample.counts, power - own), rel=1e-7)


def test_grid_and_exact_sizes_agree():
    x = lognormal_tail(np.random.default_rng(17), 5000)
    x = edges(np.array([cell_of(x).min()])) * x / x.min()  # begins on an edge, so that both have one xmin
    exact, grid = compared(x)[0], compared(on_grid(x))[0]
    for name in exact:
        assert grid[name].log_likelihood_ratio == pytest.approx(exact[name].log_likelihood_ratio, rel=0.02, abs=0.3)


def test_grid_of_whole_sizes_equals_whole_sizes_where_each_has_its_cell():
    x = np.minimum(np.ceil(3 * lognormal_tail(np.random.default_rng(18), 500, 0.9)), 200)
    exact, grid = compared(x, "whole")[0], on_grid(x)
    found = compare_rivals(grid, xmin=x.min(), alpha=exponent(Sample.of_sizes(x), "whole"), counting="whole")
    for rival in found:
        assert rival.log_likelihood_ratio == pytest.approx(exact[rival.tail].log_likelihood_ratio, rel=1e-6)


def test_a_spread_of_logs_beyond_the_power_laws_is_not_determined():
    # Coefficient of variation of y above 1: the likelihood rises towards mu = -infinity (del Castillo 1994).
    rng = np.random.default_rng(19)
    y = np.concatenate([[0.0], rng.exponential(0.2, 500), rng.exponential(2.0, 100)])
    assert y.std() > y.mean()
    rivals = compared(np.exp(y))[0]
    for name in ("lognormal", "stretched exponential"):
        assert rivals[name].favours == "not determined"
        assert rivals[name].z is rivals[name].p is rivals[name].log_likelihood_ratio is None
        assert rivals[name].parameters == {}


def test_no_cut_off_in_sight_is_ratio_zero():
    x = np.append(np.linspace(1, 1.5, 200), [50.0, 900.0])
    rival = compared(x)[0]["power law with cut-off"]
    assert (rival.log_likelihood_ratio, rival.p, rival.favours) == (0.0, 1.0, "neither")


@pytest.mark.parametrize("sizes", [[2.0] * 30, [2.0] * 30 + [3.0] * 5, 1e6 + np.linspace(0, 1e-5, 50)])
def test_too_few_or_too_close_sizes_are_not_determined(sizes):
    sample = Sample.of_sizes(np.array(sizes, float))
    found = compare_rivals(
        sample, xmin=float(sample.sizes[0]), alpha=max(2.5, exponent_or(sample)), counting="measured"
    )
    assert [rival.favours for rival in found] == ["not determined"] * 4


def exponent_or(sample):
    mean = np.average(np.log(sample.sizes) - np.log(sample.sizes[0]), weights=sample.counts)
    return 1 + 1 / mean if mean > 0 else 2.5


def test_sizes_over_six_hundred_decades_raise_no_warning():
    x = 10.0 ** np.random.default_rng(20).uniform(-300, 300, 300)
    rivals, sample, xmin = compared(x)
    assert rivals["exponential"].favours == "power law"
    assert rival_size(rivals["exponential"], sample, xmin, sample.n, 1e9) is None  # beyond doubles


@settings(max_examples=40, deadline=None)
@given(
    st.lists(st.floats(1.0, 1e4), min_size=8, max_size=60, unique=True),
    st.sampled_from([1e-9, 0.37, 1e12]),
    st.booleans(),
)
def test_units_do_not_matter_and_the_power_law_is_nested(sizes, unit, doubled):
    x = np.array(sizes)
    if np.log(x / x.min()).mean() < 1e-3:
        return
    x = np.repeat(x, 2) if doubled else x
    first, second = compared(x)[0], compared(x * unit)[0]
    for name, rival in first.items():
        if rival.log_likelihood_ratio is not None and second[name].log_likelihood_ratio is not None:
            assert second[name].log_likelihood_ratio == pytest.approx(rival.log_likelihood_ratio, rel=1e-5, abs=1e-6)
        if name != "exponential" and rival.log_likelihood_ratio is not None:
            assert rival.log_likelihood_ratio <= 0  # holds the power law as a limit
    # Twice the same events: twice the ratio.
    if doubled:
        single = compared(np.array(sizes))[0]["exponential"]
        assert first["exponential"].log_likelihood_ratio == pytest.approx(2 * single.log_likelihood_ratio, rel=1e-8)


def test_the_search_always_settles_on_power_laws():
    # 300 power laws of every steepness: exponential and cut-off must always be had (lognormal and stretched exponential
    # run to their edge in about half). No false failures: the seed is fixed and any failure is a fault.
    rng = np.random.default_rng(21)
    at_edge = 0
    for _ in range(300):
        x = rng.pareto(10 ** rng.uniform(-0.9, 1.5), int(10 ** rng.uniform(1, 3.3))) + 1
        rivals = compared(x)[0]
        assert rivals["exponential"].log_likelihood_ratio is not None
        assert rivals["power law with cut-off"].log_likelihood_ratio is not None
        at_edge += rivals["lognormal"].favours == "not determined"
    assert 90 < at_edge < 200


def test_the_truth_is_found():
    rng = np.random.default_rng(22)
    for name, x in {
        "lognormal": lognormal_tail(rng, 4000),
        "exponential": 1 + rng.standard_exponential(2000),
        "stretched exponential": (1 + 3 * rng.standard_exponential(3000)) ** 2,
    }.items():
        rivals = compared(x)[0]
        assert rivals[name].favours == "rival"
        assert best_rival(tuple(rivals.values())).tail == name


def test_nested_ratio_keeps_its_level_and_sees_a_lognormal_early():
    # 1000 power laws: level .05 has sd .0069, outside .0275 .. .0725 once in 900 runs. A lognormal truncated at its
    # mean is seen with power .8 from 64 tail events by the nested ratio at .05, but from 130 only by Vuong's z at
    # two-sided .1 (his test then has .35 at 64): 400 samples, sd .02, three of them either side. Seed fixed.
    rng = np.random.default_rng(25)

    def nested(x):
        found = compared(x)[0]["lognormal"].nested_p
        return 1.0 if found is None else found

    false = sum(nested(rng.pareto(1.4, 300) + 1) <= 0.05 for _ in range(1000))
    assert 0.0275 < false / 1000 < 0.0725
    assert np.mean([nested(lognormal_tail(rng, 64)) <= 0.05 for _ in range(400)]) == pytest.approx(0.8, abs=0.06)
    by_vuong = [compared(lognormal_tail(rng, 130))[0]["lognormal"].favours == "rival" for _ in range(400)]
    assert np.mean(by_vuong) == pytest.approx(0.8, abs=0.06)


def test_steep_whole_sizes_far_out_raise_no_warning():
    x = 1e6 + np.random.default_rng(26).geometric(6e-5, 300)
    rivals = compared(x / 1.0, "measured")[0]
    whole = compare_rivals(
        Sample.of_sizes(x), xmin=float(x.min()), alpha=exponent(Sample.of_sizes(x), "measured"), counting="whole"
    )
    for rival in whole:
        if rival.log_likelihood_ratio is not None and rivals[rival.tail].log_likelihood_ratio is not None:
            assert rival.log_likelihood_ratio == pytest.approx(rivals[rival.tail].log_likelihood_ratio, abs=0.05)


def test_best_rival_must_beat_the_power_law_and_pay_for_its_parameters():
    def rival(tail, ratio):
        return Rival(tail=tail, log_likelihood_ratio=ratio, z=None, p=None, favours="neither")

    none = rival("lognormal", None)
    assert best_rival((none, rival("exponential", 3.0), rival("power law with cut-off", 0.0))) is None
    assert best_rival((rival("lognormal", -0.9),)) is None  # less than one unit for the second parameter
    assert best_rival((rival("lognormal", -5.5), rival("exponential", -5.0))).tail == "exponential"


@pytest.mark.parametrize("name", ["lognormal", "exponential", "stretched exponential", "power law with cut-off"])
def test_sizes_by_rivals(name):
    rivals, sample, xmin = compared(lognormal_tail(np.random.default_rng(23), 2000, 0.8))
    size = rival_size(rivals[name], sample, xmin, sample.n, 1e5)
    figures = rivals[name].parameters
    if name == "lognormal":
        law = stats.lognorm(figures["sigma"], scale=np.exp(figures["mu"]))
        expected = law.isf(1e-5 * law.sf(xmin))
    elif name == "exponential":
        expected = xmin + figures["scale"] * np.log(1e5)
    elif name == "stretched exponential":
        beta = figures["beta"]
        expected = xmin * (1 + np.log(1e5) * beta / figures["slope_at_xmin"]) ** (1 / beta)
    else:
        a, cutoff = figures["alpha"], figures["cutoff"]
        survival = mpmath.gammainc(1 - a, size / cutoff) / mpmath.gammainc(1 - a, xmin / cutoff)
        assert float(survival) == pytest.approx(1e-5, rel=1e-6)
        return
    assert size == pytest.approx(expected, rel=1e-8)
    assert rival_size(rivals[name], sample, xmin, sample.n // 20, 10) is None  # lies below xmin


def test_whole_sizes_by_rivals_are_the_smallest_integers():
    x = 5.0 + np.random.default_rng(24).geometric(0.1, 800) - 1
    x[0] = 5.0
    rivals, sample, xmin = compared(x, "whole")
    q = np.exp(-1 / rivals["exponential"].parameters["scale"])
    size = rival_size(rivals["exponential"], sample, xmin, sample.n, 1e4, counting="whole")
    assert q ** (size + 1 - xmin) <= 1e-4 < q ** (size - xmin)


def test_whole_sizes_by_rivals_on_the_grid_come_to_an_end():
    # There xmin is the edge of a cell, no integer: the search for the smallest integer must still end.
    x = np.ceil(2 * lognormal_tail(np.random.default_rng(27), 800)) + 1
    exact, grid = Sample.of_sizes(x), on_grid(x)
    alpha = exponent(exact, "whole")
    for sample in (exact, grid):
        xmin = float(sample.sizes[0])
        found = compare_rivals(sample, xmin=xmin, alpha=alpha, counting="whole")
        sizes = [rival_size(rival, sample, xmin, sample.n, 1e4, counting="whole") for rival in found]
        assert all(size == round(size) for size in sizes)
        if sample is exact:
            expected = sizes
    assert sizes == pytest.approx(expected, rel=0.02)
