"""What must hold for the fit of any sample."""

from __future__ import annotations

import numpy as np
from hypothesis import assume, given, settings
from hypothesis import strategies as st

from monitor.tail.judgement import Options
from monitor.tail.sample import Sample
from monitor.tail.scan import find_tail
from monitor.tail.tail_fit import NoTail
from storage.grid import cell_of

sizes = st.lists(st.floats(1e-3, 1e6), min_size=12, max_size=80).map(np.array)
whole = st.lists(st.integers(1, 400), min_size=12, max_size=80).map(lambda v: np.array(v, float))
FEW = Options(min_tail=5)


def numbers(fit):
    return np.array([fit.alpha, fit.ks_distance, fit.n_tail])


def close(one, other):
    """Same fit; where distances tie to the last digit, either candidate will do."""
    return abs(one.ks_distance - other.ks_distance) <= 1e-9 * one.ks_distance


@given(sizes, st.randoms(use_true_random=False))
def test_the_order_of_events_does_not_matter(values, random):
    shuffled = list(values)
    random.shuffle(shuffled)
    assert find_tail(Sample.of_sizes(values), FEW) == find_tail(Sample.of_sizes(np.array(shuffled)), FEW)


@given(sizes, st.floats(1e-3, 1e3))
def test_measured_sizes_in_another_unit(values, factor):
    fit, scaled = (find_tail(Sample.of_sizes(v), FEW) for v in (values, values * factor))
    assume(not isinstance(fit, NoTail) and not isinstance(scaled, NoTail))
    assert close(fit, scaled)
    if np.isclose(scaled.xmin, fit.xmin * factor, rtol=1e-12):
        np.testing.assert_allclose(numbers(scaled), numbers(fit), rtol=1e-7)


@given(sizes, st.integers(2, 9))
def test_events_counted_several_times_move_nothing_but_the_counts(values, times):
    sample = Sample.of_sizes(values)
    more = Sample(sample.sizes, sample.counts * times)
    fit, many = find_tail(sample, FEW), find_tail(more, Options(min_tail=5 * times))
    assume(not isinstance(fit, NoTail))
    assert close(fit, many)
    if many.xmin == fit.xmin:
        assert many.n_tail == times * fit.n_tail
        np.testing.assert_allclose(many.alpha, fit.alpha, rtol=1e-9)


@given(whole)
def test_the_best_candidate_is_no_farther_than_any_given_one(values):
    for counting in ("measured", "whole"):
        sample = Sample.of_sizes(values)
        fit = find_tail(sample, Options(min_tail=5, counting=counting))
        if isinstance(fit, NoTail):
            continue
        given_fits = (find_tail(sample, Options(min_tail=5, counting=counting, xmin=float(x))) for x in sample.sizes)
        distances = [g.ks_distance for g in given_fits if not isinstance(g, NoTail)]
        assert min(distances) == fit.ks_distance


@given(whole)
def test_near_minimum_holds_the_answer(values):
    fit = find_tail(Sample.of_sizes(values), Options(min_tail=5, counting="whole"))
    assume(not isinstance(fit, NoTail))
    assert fit.near_minimum.xmin[0] <= fit.xmin <= fit.near_minimum.xmin[1]
    assert fit.near_minimum.alpha[0] <= fit.alpha <= fit.near_minimum.alpha[1]


@given(sizes, sizes)
def test_grid_samples_add_up(one, other):
    """Counting two heaps of cells together or the whole at once is the same sample, hence the same fit."""

    def gridded(values):
        cells, counts = np.unique(cell_of(values), return_counts=True)
        return dict(zip(cells.tolist(), counts.tolist(), strict=True))

    heap, second = gridded(one), gridded(other)
    for cell, count in second.items():
        heap[cell] = heap.get(cell, 0) + count
    summed = Sample.of_cells(np.array(sorted(heap)), np.array([heap[c] for c in sorted(heap)]))
    both = gridded(np.concatenate([one, other]))
    at_once = Sample.of_cells(np.array(sorted(both)), np.array([both[c] for c in sorted(both)]))
    assert find_tail(summed, FEW) == find_tail(at_once, FEW)


@settings(max_examples=60)
@given(st.lists(st.floats(5e-324, 1.7e308), min_size=1, max_size=60).map(np.array), st.sampled_from([None, 1.0]))
def test_any_positive_doubles_give_an_answer(values, xmin):
    for counting in ("measured", "whole"):
        fit = find_tail(Sample.of_sizes(values), Options(xmin=xmin, counting=counting, min_tail=3))
        assert isinstance(fit, NoTail) or (fit.alpha > 1.0 and 0.0 <= fit.ks_distance <= 1.0)
