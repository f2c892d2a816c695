"""The scan is exact: row and distance of trying every candidate, to the last bit, whatever the sizes look like."""

from __future__ import annotations

import numpy as np
import pytest

from monitor.tail.judgement import Options
from monitor.tail.kernels.ladder import last_candidate, new_scratch
from monitor.tail.kernels.scanning import near, nearest
from monitor.tail.sample import Sample
from monitor.tail.scan import find_tail, law_of
from storage.grid import CELL_WIDTH, cell_of
from tests.references import min_ks
from tests.references.every_candidate import distances, near_of_all, nearest_of_all


def pareto(n, rng, alpha=2.5, xmin=1.0):
    return xmin * rng.random(n) ** (-1 / (alpha - 1))


def body_and_tail(n, rng):
    k = rng.binomial(n, 0.1)
    return np.concatenate([rng.uniform(1, 100, n - k), pareto(k, rng, xmin=100.0)])


def quantiles(n):
    return 1 - (np.arange(n) + 0.5) / n


RANDOM = {
    "pareto": pareto,
    "body and tail": body_and_tail,
    "lognormal": lambda n, rng: np.exp(rng.normal(3, 1.2, n)),
    "exponential": lambda n, rng: rng.exponential(10, n) + 0.01,
    "one decimal": lambda n, rng: np.round(body_and_tail(n, rng), 1) + 0.1,
    "few levels": lambda n, rng: rng.integers(1, 12, n).astype(float),
    "levels in a tail": lambda n, rng: np.where(rng.random(n) < 0.4, rng.choice([10.0, 50, 250], n), pareto(n, rng)),
}
ADVERSARIAL = {
    "perfect quantiles": lambda n, rng: quantiles(n) ** (-1 / 1.5),
    "quantiles with jitter": lambda n, rng: quantiles(n) ** (-1 / 1.5) * np.exp(rng.normal(0, 1e-3, n)),
    "lattice in the logarithm": lambda n, rng: np.exp(0.05 * np.floor(-np.log(quantiles(n)) / 0.075)),
    "nearly equal logarithms": lambda n, rng: 1e6 * (1 + 1e-15 * rng.integers(0, 4 * n, n)),
    "log-periodic": lambda n, rng: np.exp(-np.log(quantiles(n)) / 1.5 + 0.02 * np.sin(-20 * np.log(quantiles(n)))),
    "almost constant": lambda n, rng: 1e6 + rng.random(n),
    "two clusters": lambda n, rng: np.concatenate([rng.normal(10, 0.01, n // 2), rng.normal(1e3, 1, n - n // 2)]),
    "one giant": lambda n, rng: np.append(rng.pareto(1.5, n - 1) + 1, 1e30),
    "very heavy": lambda n, rng: rng.random(n) ** -5.0,
    "even steps": lambda n, rng: np.linspace(1, 2, n),
    "all of 600 decades": lambda n, rng: 10 ** rng.uniform(-300, 300, n),
    "two joined tails": lambda n, rng: np.concatenate([pareto(n // 2, rng, 2.2), pareto(n - n // 2, rng, 4.0)]),
}
WHOLE = {
    "zeta 2.5": lambda n, rng: rng.zipf(2.5, n).astype(float),
    "zeta 3.2": lambda n, rng: rng.zipf(3.2, n).astype(float),
    "body and tail": lambda n, rng: np.floor(body_and_tail(n, rng)),
    "wide": lambda n, rng: np.maximum(1, np.floor(np.exp(rng.normal(9, 1.3, n)))),
    "geometric": lambda n, rng: rng.geometric(0.2, n).astype(float),
    "seven levels": lambda n, rng: rng.integers(1, 8, n).astype(float),
    "large neighbours": lambda n, rng: 1e15 + rng.integers(0, 50, n),
    "very heavy": lambda n, rng: np.minimum(np.floor(rng.random(n) ** -3.0), 2.0**52),
}


def on_grid(sizes):
    cells, counts = np.unique(cell_of(sizes), return_counts=True)
    return Sample.of_cells(cells, counts.astype(np.int64))


def assert_exact(sample, options):
    ladder = law_of(sample, options).rungs.ladder
    scratch = new_scratch(ladder.place.size)
    last = last_candidate(ladder.events, options.min_tail)
    found = nearest(ladder, last, np.inf, -1, False, scratch)
    expected = nearest_of_all(ladder, options.min_tail)
    assert (found.row, found.distance) == (expected.row, expected.distance)
    if found.row < 0:
        return
    spread = near(ladder, last, 1.05 * found.distance, found.row, scratch)
    assert spread == near_of_all(ladder, options.min_tail, 1.05)
    # In decision mode a candidate nearer than the mark is found exactly when there is one.
    for mark, there in ((found.distance, False), (np.nextafter(found.distance, 1.0), True)):
        hit = nearest(ladder, last, mark, last, True, scratch)
        assert (hit.row >= 0) is there


@pytest.mark.parametrize("kind", [*RANDOM, *ADVERSARIAL])
def test_measured_sizes(kind):
    rng = np.random.default_rng(len(kind))
    make = {**RANDOM, **ADVERSARIAL}[kind]
    for round_ in range(60):
        n = int(rng.choice([2, 3, 5, 11, 13, 20, 50, 100, 300, 1000]))
        sizes = np.abs(make(n, rng))
        sample = Sample.of_sizes(sizes)
        if round_ % 3 == 2:
            sample = Sample(sample.sizes, rng.integers(1, 6, sample.sizes.size))
        assert_exact(sample, Options(min_tail=int(rng.choice([2, 3, 5, 10]))))


@pytest.mark.parametrize("kind", [*RANDOM, *ADVERSARIAL])
def test_measured_sizes_when_there_are_many(kind):
    rng = np.random.default_rng(11)
    sample = Sample.of_sizes(np.abs({**RANDOM, **ADVERSARIAL}[kind](4000, rng)))
    assert_exact(sample, Options())


@pytest.mark.slow
def test_twenty_thousand_measured_sizes():
    assert_exact(Sample.of_sizes(body_and_tail(20_000, np.random.default_rng(12))), Options())


@pytest.mark.parametrize("kind", WHOLE)
@pytest.mark.parametrize("where", ["exact", "grid"])
def test_whole_sizes(kind, where):
    rng = np.random.default_rng(len(kind))
    for _ in range(30):
        sizes = WHOLE[kind](int(rng.choice([12, 30, 100, 400])), rng)
        sample = Sample.of_sizes(sizes) if where == "exact" else on_grid(sizes)
        assert_exact(sample, Options(counting="whole", min_tail=int(rng.choice([2, 5, 10]))))


@pytest.mark.parametrize("kind", [*RANDOM, *ADVERSARIAL])
def test_measured_sizes_on_the_grid(kind):
    rng = np.random.default_rng(len(kind))
    for _ in range(30):
        sizes = np.abs({**RANDOM, **ADVERSARIAL}[kind](int(rng.choice([12, 100, 1000])), rng))
        sample = on_grid(sizes)
        if rng.random() < 0.5:
            sample = Sample.of_cells(sample.cells, sample.counts * rng.integers(1, 10**6, sample.counts.size))
        assert_exact(sample, Options(min_tail=int(rng.choice([2, 5, 10]))))


@pytest.mark.parametrize("kind", RANDOM)
def test_against_plain_numpy_measured(kind):
    rng = np.random.default_rng(21)
    for n in (20, 100, 400):
        sample = Sample.of_sizes(RANDOM[kind](n, rng))
        fit, plain = find_tail(sample, Options()), min_ks.measured(sample.sizes, sample.counts, 10)
        assert fit.xmin == plain.xmin
        assert fit.n_tail == plain.n_tail
        assert fit.alpha == pytest.approx(plain.alpha, rel=1e-9)
        assert fit.ks_distance == pytest.approx(plain.distance, abs=1e-12)


@pytest.mark.parametrize("kind", ["zeta 2.5", "zeta 3.2", "body and tail", "wide", "geometric"])
def test_against_plain_scipy_whole(kind):
    rng = np.random.default_rng(22)
    for n in (30, 200):
        sample = Sample.of_sizes(WHOLE[kind](n, rng))
        fit = find_tail(sample, Options(counting="whole"))
        plain = min_ks.whole(sample.sizes, sample.counts, 10)
        assert (fit.xmin, fit.n_tail) == (plain.xmin, plain.n_tail)
        # A minimum found by comparing function values is good to the root of the machine's precision.
        assert fit.alpha == pytest.approx(plain.alpha, rel=1e-6)
        assert fit.ks_distance == pytest.approx(plain.distance, abs=1e-6)


@pytest.mark.parametrize("kind", ["pareto", "body and tail", "lognormal"])
def test_against_plain_numpy_on_the_grid(kind):
    sample = on_grid(RANDOM[kind](500, np.random.default_rng(23)))
    fit, plain = find_tail(sample, Options()), min_ks.binned(sample.cells, sample.counts, 10, CELL_WIDTH)
    assert (fit.start_cell, fit.n_tail) == (plain.xmin, plain.n_tail)
    assert fit.alpha == pytest.approx(plain.alpha, rel=1e-9)
    assert fit.ks_distance == pytest.approx(plain.distance, abs=1e-12)


def test_the_exponent_of_whole_sizes_on_the_grid_is_that_of_the_cell_likelihood():
    rng = np.random.default_rng(24)
    sample = on_grid(np.floor(pareto(3000, rng, 2.4, 300.0)))
    law = law_of(sample, Options(counting="whole"))
    ladder = law.rungs.ladder
    fit = law.fit()
    rows = slice(fit.start, None)
    best = min_ks.whole_cells_alpha(ladder.place[rows], ladder.beyond[rows], sample.counts[rows])
    assert fit.alpha == pytest.approx(best, rel=2e-7)


@pytest.mark.parametrize(("counts", "equal"), [((3, 2, 1, 3), 2), ((3, 2, 2, 2), 2), ((4, 2, 1, 1), 3)])
def test_of_equal_distances_the_smallest_size_wins(counts, equal):
    sample = Sample(2.0 ** np.arange(4), np.array(counts))
    ladder = law_of(sample, Options(min_tail=2)).rungs.ladder
    all_of_them = distances(ladder, 2)
    assert np.sum(all_of_them == all_of_them.min()) == equal
    assert find_tail(sample, Options(min_tail=2)).xmin == 1.0


def test_of_equal_distances_the_smallest_size_wins_even_if_another_was_seen_first():
    sample = Sample(2.0 ** np.arange(4), np.array([4, 2, 1, 1]))
    ladder = law_of(sample, Options(min_tail=2)).rungs.ladder
    for hint in (-1, 0, 1, 2):
        assert nearest(ladder, 2, np.inf, hint, False, new_scratch(4)).row == 0


@pytest.mark.parametrize("kind", ["wide", "body and tail", "zeta 2.5"])
@pytest.mark.parametrize("where", ["exact", "grid"])
def test_whole_sizes_when_there_are_many(kind, where):
    rng = np.random.default_rng(31)
    for n in (1500, 3000, 3000):
        sizes = WHOLE[kind](n, rng)
        sample = Sample.of_sizes(sizes) if where == "exact" else on_grid(sizes)
        assert_exact(sample, Options(counting="whole"))


def test_whole_sizes_whose_tail_is_all_but_perfect():
    """The smaller the best distance, the more is refused by bounds, and the tighter these must hold."""
    rng = np.random.default_rng(32)
    for alpha in (1.8, 2.5, 3.5):
        quantile = np.floor(40 * quantiles(4000) ** (-1 / (alpha - 1)) * np.exp(rng.normal(0, 1e-3, 4000)) + 0.5)
        assert_exact(Sample.of_sizes(quantile), Options(counting="whole"))
