"""Replicates: the law of what is drawn and fitted, and the short cut of decision mode."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats
from scipy.special import zeta

from monitor.tail.gof import DATA_KEY, MODEL_KEY
from monitor.tail.judgement import Options
from monitor.tail.kernels.chance import key_of
from monitor.tail.laws.law import HAIR
from monitor.tail.sample import Sample
from monitor.tail.scan import find_tail, law_of
from monitor.tail.tail_fit import NoTail
from storage.grid import cell_of, edges
from tests.tail.test_scanning import RANDOM, WHOLE, on_grid

FALSE_FAILURES = 1e-4  # of each comparison below, were it drawn with a fresh key


def draws_of(law, alpha, xmin, size, rng):
    """Independent draws above xmin: numpy's and scipy's, not ours."""
    if law == "measured":
        return xmin * rng.random(size) ** (-1 / (alpha - 1))
    u = rng.random(size)
    low, high = np.full(size, xmin), np.full(size, xmin)
    while (inside := zeta(alpha, high + 1) / zeta(alpha, xmin) >= u).any():
        high = np.where(inside, 2 * high + 1, high)
    for _ in range(60):  # the largest v with P(X >= v) >= u
        middle = np.ceil((low + high) / 2)
        inside = zeta(alpha, middle) / zeta(alpha, xmin) >= u
        low, high = np.where(inside, middle, low), np.where(inside, high, middle - 1)
    return low


def plain_replicate(sizes, fit, counted, rng):
    tail = rng.binomial(fit.n, fit.n_tail / fit.n)
    below = sizes[: fit.n - fit.n_tail]
    body = rng.choice(below, fit.n - tail) if fit.n > tail else np.zeros(0)
    drawn = draws_of(fit.counting, fit.alpha, fit.xmin, tail, rng)
    return counted(np.concatenate([body, drawn]))


CASES = [
    ("measured", "pareto", "exact", 40),
    ("measured", "body and tail", "exact", 600),
    ("measured", "one decimal", "exact", 600),
    ("measured", "body and tail", "grid", 600),
    ("whole", "zeta 2.5", "exact", 300),
    ("whole", "body and tail", "exact", 600),
    ("whole", "wide", "exact", 300),
    ("whole", "body and tail", "grid", 600),
    ("whole", "wide", "grid", 300),
]


@pytest.fixture(scope="module", params=CASES, ids=lambda case: "-".join(map(str, case)))
def case(request):
    counting, kind, where, n = request.param
    rng = np.random.default_rng(n)
    sizes = np.sort((RANDOM if counting == "measured" else WHOLE)[kind](n, rng))
    counted = Sample.of_sizes if where == "exact" else on_grid
    options = Options(counting=counting)
    sample = counted(sizes)
    law = law_of(sample, options)
    return sizes, sample, counted, options, law, law.fit(), rng


def test_fitted_replicates_follow_the_law_of_plain_ones(case):
    sizes, _, counted, options, law, fit, rng = case
    ours = law.replicate(fit, "model", key_of(1, MODEL_KEY))(0, 2000, False)
    theirs = [find_tail(plain_replicate(sizes, fit, counted, rng), options) for _ in range(250)]
    theirs = [t for t in theirs if not isinstance(t, NoTail)]
    for mine, yours in (
        (ours.distance, [t.ks_distance for t in theirs]),
        (ours.alpha, [t.alpha for t in theirs]),
        (ours.n_tail, [t.n_tail for t in theirs]),
        (ours.xmin, [t.xmin for t in theirs]),
    ):
        mine = mine[np.isfinite(mine)]
        assert stats.ks_2samp(mine, yours, method="asymp").pvalue > FALSE_FAILURES


def test_resampled_data_follow_the_plain_bootstrap(case):
    sizes, _, counted, options, law, fit, rng = case
    ours = law.replicate(fit, "data", key_of(1, DATA_KEY))(0, 2000, False)
    theirs = [find_tail(counted(np.sort(rng.choice(sizes, sizes.size))), options) for _ in range(250)]
    theirs = [t for t in theirs if not isinstance(t, NoTail)]
    for mine, yours in ((ours.alpha, [t.alpha for t in theirs]), (ours.xmin, [t.xmin for t in theirs])):
        mine = mine[np.isfinite(mine)]
        assert stats.ks_2samp(mine, yours, method="asymp").pvalue > FALSE_FAILURES


def test_decisions_are_those_of_full_replicates(case):
    *_, law, fit, _ = case
    replicate = law.replicate(fit, "model", key_of(4, MODEL_KEY))
    full, decided = replicate(0, 1500, False), replicate(0, 1500, True)
    np.testing.assert_array_equal(decided.distance == 1.0, full.distance >= fit.ks_distance * (1 - HAIR))


def test_a_replicate_depends_on_its_number_alone(case):
    *_, law, fit, _ = case
    replicate = law.replicate(fit, "model", key_of(2, MODEL_KEY))
    whole, part = replicate(0, 40, False), replicate(25, 15, False)
    for name in ("distance", "alpha", "xmin", "n_tail"):
        np.testing.assert_array_equal(getattr(whole, name)[25:], getattr(part, name))


def test_replicates_at_a_given_xmin_stay_there():
    rng = np.random.default_rng(6)
    sizes = RANDOM["body and tail"](500, rng)
    options = Options(xmin=104.5)
    law = law_of(Sample.of_sizes(sizes), options)
    fit = law.fit()
    assert (fit.xmin, fit.n_tail) == (104.5, int((sizes >= 104.5).sum()))
    assert fit.alpha == pytest.approx(1 + 1 / np.log(sizes[sizes >= 104.5] / 104.5).mean())
    for source in ("model", "data"):
        chunk = law.replicate(fit, source, key_of(1, 1))(0, 3000, False)
        assert set(chunk.xmin) == {104.5}
        share = fit.n_tail / fit.n
        assert chunk.n_tail.mean() == pytest.approx(fit.n_tail, abs=5 * np.sqrt(fit.n * share * (1 - share) / 3000))


def test_replicates_without_a_candidate_are_infinitely_far():
    """Ten events, two of them large: about one resample in ten holds a single size, and so no candidate."""
    sample = Sample(np.array([1.0, 2.0, 3.0]), np.array([8, 1, 1]))
    options = Options(min_tail=10, counting="whole")
    law = law_of(sample, options)
    chunk = law.replicate(law.fit(), "data", key_of(1, 1))(0, 2000, False)
    none = np.isinf(chunk.distance)
    assert np.mean(none) == pytest.approx(0.8**10 + 2 * 0.1**10, abs=0.03)
    assert (chunk.n_tail[none] == 0).all()
    assert np.isnan(chunk.alpha[none]).all()


def test_cells_of_replicates_are_cells_of_the_grid():
    sizes = RANDOM["body and tail"](400, np.random.default_rng(8))
    sample = on_grid(sizes)
    law = law_of(sample, Options())
    chunk = law.replicate(law.fit(), "model", key_of(1, 1))(0, 100, False)
    np.testing.assert_array_equal(edges(cell_of(chunk.xmin)), chunk.xmin)
