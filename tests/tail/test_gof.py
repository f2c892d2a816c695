"""The bootstrap: the same for any threads, chunks and interruptions; stops when it may and not before."""

from __future__ import annotations

import numpy as np
import pytest

from monitor.tail import gof
from monitor.tail.gof import DRAWN, Bootstrap, Interrupted, Tally
from monitor.tail.judgement import Options
from monitor.tail.sample import Sample
from monitor.tail.scan import law_of
from monitor.tail.stopping import FLOOR, first_decision
from tests.tail.test_scanning import RANDOM, WHOLE, on_grid


def bootstrap_of(sample, **options):
    options = Options(**options)
    law = law_of(sample, options)
    return Bootstrap(law, law.fit(), options)


@pytest.fixture(scope="module")
def sample():
    return Sample.of_sizes(RANDOM["body and tail"](400, np.random.default_rng(3)))


@pytest.fixture(scope="module")
def implausible():
    return Sample.of_sizes(np.random.default_rng(4).exponential(1.0, 5000) + 1.0)


def assert_same(one, other):
    for name in ("far", "alpha", "xmin", "n_tail"):
        np.testing.assert_array_equal(getattr(one, name), getattr(other, name))


SAMPLES = {
    "measured": (lambda rng: Sample.of_sizes(RANDOM["body and tail"](300, rng)), "measured"),
    "whole": (lambda rng: Sample.of_sizes(WHOLE["body and tail"](300, rng)), "whole"),
    "grid": (lambda rng: on_grid(RANDOM["body and tail"](300, rng)), "measured"),
    "whole on the grid": (lambda rng: on_grid(WHOLE["body and tail"](300, rng)), "whole"),
}


@pytest.mark.parametrize("kind", SAMPLES)
def test_threads_and_chunks_change_nothing(kind, monkeypatch):
    make, counting = SAMPLES[kind]
    sample = make(np.random.default_rng(5))
    common = {"counting": counting, "replicates": 700, "stop_early": False}
    one = bootstrap_of(sample, **common).run()
    monkeypatch.setattr(gof, "_ROWS_A_CHUNK", 7 * 300)
    assert_same(one, bootstrap_of(sample, **common, threads=3).run())


@pytest.mark.parametrize("rule_out", [0.02, 0.1, 0.5, 0.97])
def test_where_it_stops_does_not_depend_on_threads_and_chunks(rule_out, monkeypatch, sample):
    one = bootstrap_of(sample, rule_out=rule_out).run()
    monkeypatch.setattr(gof, "_ROWS_A_CHUNK", 7 * 400)
    other = bootstrap_of(sample, rule_out=rule_out, threads=3).run()
    assert_same(one, other)


def test_an_interrupted_bootstrap_goes_on_where_it_was(sample):
    bootstrap = bootstrap_of(sample, replicates=900, stop_early=False)
    seen = []

    def soon():
        return len(seen) >= 2

    with pytest.raises(Interrupted):
        bootstrap.run(progress=lambda done, budget: seen.append((done, budget)), cancelled=soon)
    assert [budget for _, budget in seen] == [900, 900]
    whole = bootstrap.run()
    for cut in (1, 250, 400, 555):
        stored = Tally(whole.far[:cut], whole.alpha[:cut], whole.xmin[:cut], whole.n_tail[:cut])
        assert_same(whole, bootstrap.run(stored))
    assert_same(whole, bootstrap.run(whole))


def test_progress_ends_with_the_replicates_done(sample):
    seen = []
    bootstrap = bootstrap_of(sample, replicates=450, stop_early=False)
    tally = bootstrap.run(progress=lambda done, budget: seen.append(done))
    assert seen == sorted(seen)
    assert seen[-1] == tally.replicates == 450


def test_the_whole_budget_is_run_when_asked(sample):
    bootstrap = bootstrap_of(sample, replicates=1000, stop_early=False)
    answer = bootstrap.answer(bootstrap.run())
    assert (answer.replicates, answer.stopped) == (1000, "budget")
    assert answer.p == answer.at_least_as_far / 1000


def test_a_clear_no_stops_at_the_floor(implausible):
    bootstrap = bootstrap_of(implausible, rule_out=0.5, min_tail=2500)
    tally = bootstrap.run()
    answer = bootstrap.answer(tally)
    assert answer.replicates == FLOOR
    assert (answer.stopped, answer.plausible, answer.doubtful) == ("decided", False, False)


def test_a_clear_yes_still_gets_its_full_refits(sample):
    bootstrap = bootstrap_of(sample)
    tally = bootstrap.run()
    answer = bootstrap.answer(tally)
    assert answer.plausible
    assert answer.replicates == DRAWN == tally.draws(400).alpha.size
    assert first_decision(tally.far, 0.1) < DRAWN


def test_an_early_stop_is_a_prefix_of_the_whole_run(sample):
    early, whole = bootstrap_of(sample).run(), bootstrap_of(sample, stop_early=False).run()
    np.testing.assert_array_equal(early.far, whole.far[: early.replicates])
    np.testing.assert_array_equal(early.alpha, whole.alpha[: early.alpha.size])


def test_near_the_threshold_it_stays_in_doubt(sample):
    whole = bootstrap_of(sample, stop_early=False).run()
    threshold = float(whole.far.mean())
    bootstrap = bootstrap_of(sample, rule_out=threshold)
    answer = bootstrap.answer(bootstrap.run())
    assert answer.doubtful
    assert answer.p_interval[0] < threshold < answer.p_interval[1]


def test_replicates_are_counted_from_the_seed(sample):
    one, other = (bootstrap_of(sample, seed=seed, replicates=300).run() for seed in (1, 2))
    assert not np.array_equal(one.alpha, other.alpha)


def test_resampled_data_are_the_same_for_any_threads(sample):
    one, two = (bootstrap_of(sample, threads=threads).resampled() for threads in (1, 2))
    np.testing.assert_array_equal(one.alpha, two.alpha)
    assert (one.source, one.n, one.alpha.size) == ("data", 400, DRAWN)
    with pytest.raises(Interrupted):
        bootstrap_of(sample).resampled(cancelled=lambda: True)
