"""The whole judgement: every field means what it says, and hopeless data get a reason instead of an error."""

from __future__ import annotations

import json
import re

import msgspec
import numpy as np
import pytest

from monitor.tail.gof import DRAWN, Interrupted
from monitor.tail.judge import compile_everything, judge
from monitor.tail.judgement import Judgement, Options, as_document
from monitor.tail.sample import Sample
from tests.tail.test_scanning import RANDOM, on_grid

WHOLE = Options(counting="whole")


@pytest.fixture(scope="module")
def sizes():
    return RANDOM["body and tail"](2000, np.random.default_rng(1))


@pytest.fixture(scope="module")
def judged(sizes):
    return judge(Sample.of_sizes(sizes), Options(limit=5000.0, period_days=30.0, events_per_day=1000.0))


def test_a_power_law_in_the_tail(judged):
    assert judged.gof.plausible
    assert judged.alpha_interval[0] < 2.5 < judged.alpha_interval[1]
    assert judged.xmin_interval[0] <= judged.xmin <= judged.xmin_interval[1]
    assert judged.n_tail_interval[0] < judged.n_tail < judged.n_tail_interval[1]
    fixed = judged.alpha_interval_fixed_xmin
    assert fixed[1] - fixed[0] < judged.alpha_interval[1] - judged.alpha_interval[0]
    assert judged.near_minimum.xmin[0] <= judged.xmin <= judged.near_minimum.xmin[1]
    assert judged.mean_finite is True
    assert judged.limit.expected == pytest.approx(
        30_000 * judged.n_tail / 2000 * (5000 / judged.xmin) ** (1 - judged.alpha)
    )
    assert {rival.tail for rival in judged.rivals} >= {"lognormal", "exponential"}
    assert judged.levels[0].interval[0] < judged.levels[0].size < judged.levels[0].interval[1]
    assert any(f"{DRAWN} replicates of the fitted power law" in sentence for sentence in judged.assumed)


def test_it_is_the_same_a_second_time_and_with_more_threads(sizes, judged):
    again = judge(Sample.of_sizes(sizes), Options(limit=5000.0, period_days=30.0, events_per_day=1000.0, threads=2))
    assert again == judged


def test_it_can_be_written_as_json_and_read_back(judged):
    text = json.dumps(as_document(judged), allow_nan=False)
    assert msgspec.json.decode(text, type=Judgement) == judged


def test_no_power_law_is_an_answer_with_intervals_from_the_data():
    sizes = np.random.default_rng(2).exponential(1.0, 3000) + 1.0
    judged = judge(Sample.of_sizes(sizes), Options(min_tail=1500))
    assert not judged.gof.plausible
    assert any("drawn from the data themselves" in sentence for sentence in judged.assumed)
    assert any("a power law is ruled out" in sentence for sentence in judged.warnings)
    best = [rival for rival in judged.rivals if rival.favours == "rival"]
    assert best
    assert judged.levels[0].by_rival["size"] < judged.levels[0].size


def test_very_many_events_make_any_misfit_visible_so_its_size_is_told():
    cells = np.arange(1000, 2400)
    counts = np.floor(1e9 * np.exp(-0.006 * (cells - 1000)) * (1 + 0.01 * np.sin(cells / 50)) / 100).astype(np.int64)
    judged = judge(Sample.of_cells(cells[counts > 0], counts[counts > 0]), Options(rivals=False, min_tail=10**8))
    assert judged.gof.p == 0
    assert judged.ks_distance < 0.02
    assert any("nowhere more than" in sentence for sentence in judged.warnings)


def test_a_given_xmin_is_honoured(sizes):
    judged = judge(Sample.of_sizes(sizes), Options(xmin=123.4, rivals=False))
    assert judged.xmin == 123.4
    assert judged.n_tail == (sizes >= 123.4).sum()
    assert (judged.xmin_interval, judged.near_minimum) == (None, None)


def test_a_given_xmin_on_the_grid_is_that_of_its_cell(sizes):
    judged = judge(on_grid(sizes), Options(xmin=123.4, rivals=False))
    assert 123.4 / 1.0046 < judged.xmin <= 123.4
    assert judged.resolution == "grid"
    assert any("begins with its cell" in sentence for sentence in judged.assumed)


def test_a_given_xmin_of_whole_sizes_is_a_whole_number():
    sizes = np.random.default_rng(3).zipf(2.3, 500).astype(float)
    judged = judge(Sample.of_sizes(sizes), Options(xmin=2.5, counting="whole", rivals=False))
    assert judged.xmin == 3.0
    assert judged.n_tail == (sizes >= 3).sum()


def test_without_replicates_there_is_no_p_but_an_interval(sizes):
    judged = judge(Sample.of_sizes(sizes), Options(replicates=0, rivals=False))
    assert judged.gof is None
    assert judged.alpha_interval == judged.alpha_interval_fixed_xmin
    assert judged.xmin_interval is None


def test_it_can_be_cancelled(sizes):
    with pytest.raises(Interrupted):
        judge(Sample.of_sizes(sizes), Options(), cancelled=lambda: True)


@pytest.mark.parametrize(
    ("sizes", "options", "reason"),
    [
        ([], Options(), "no events"),
        ([5.0] * 100, Options(), "all 100 sizes are 5"),
        ([1.0, 2.0] * 50, Options(), "take only two values, 1 and 2"),
        ([1.0, 2.0, 3.0], Options(), "^3 events are fewer than the 10 "),
        ([1.0], Options(), "^1 event is fewer than the 10 "),
        ([5.0], Options(min_tail=1), "^the only size is 5: "),
        ([5.0] * 2000, Options(), "^all 2 000 sizes are 5: "),
        ([1.0, 2.0, 3.0], Options(min_tail=3000), "^3 events are fewer than the 3 000 "),
        (list(range(1, 40)), Options(xmin=39.0), "^only 1 event is at or above the given xmin of 39,"),
        ([0.0, 1.0, 2.0, 3.0] * 9, Options(), "must be a positive number"),
        ([-4.0, 1.0, 2.0, 3.0] * 9, Options(), "must be a positive number; the smallest here is -4"),
        ([1.0, 2.0, 3.0, 2.0**54] * 9, WHOLE, "beyond 2\\^53"),
        ([1.0, 2.5, 3.0, 4.0] * 9, WHOLE, "2.5 is not a whole number"),
        (list(range(1, 40)), Options(xmin=35.0), "only 5 events are at or above the given xmin of 35"),
        (list(range(1, 40)), Options(xmin=1e9), "^no event is at or above"),
        ([1.0, 2.0] + [3.0] * 20, Options(xmin=3.0), "all the same"),
        ([*range(1, 15), 99.0] + [99.0] * 40, Options(min_tail=55), None),
        ([1.0, 2.0, 3.0] + [4.0] * 9, Options(min_tail=12), None),
    ],
)
def test_hopeless_data_get_a_reason(sizes, options, reason):
    judged = judge(Sample.of_sizes(np.array(sizes, float)), options)
    if reason is None:
        assert judged.alpha is not None
        return
    assert judged.alpha is None
    assert re.search(reason, judged.reason)
    json.dumps(as_document(judged), allow_nan=False)


EXTREME = {
    "600 decades": lambda rng: 10 ** rng.uniform(-300, 300, 500),
    "three sizes 300 decades apart": lambda rng: np.repeat([1e-300, 1.0, 1e300], 20),
    "a million ties": lambda rng: np.concatenate([np.ones(10**6), [2.0], np.full(12, 3.0)]),
    "last digits": lambda rng: 1.0 + 2.3e-16 * np.arange(60),
    "subnormal": lambda rng: 5e-324 * np.arange(1, 60),
    "near the largest double": lambda rng: 1.7e308 * (1 - 1e-3 * np.arange(60) / 60),
    "one giant": lambda rng: np.append(rng.pareto(1.5, 500) + 1, 1e300),
    "a pile of one size": lambda rng: np.concatenate([np.full(2000, 0.3), 0.3 * (1 + 1.2e-16 * np.arange(40))]),
    "integers beyond 2^53": lambda rng: 2.0**53 + 4 * np.arange(50),
}


@pytest.mark.parametrize("kind", EXTREME)
@pytest.mark.parametrize("where", ["exact", "grid"])
def test_extreme_sizes_give_an_answer_without_a_warning(kind, where):
    sizes = EXTREME[kind](np.random.default_rng(4))
    sample = Sample.of_sizes(sizes) if where == "exact" else on_grid(sizes)
    for options in (Options(replicates=300), Options(replicates=300, xmin=2.0)):
        judged = judge(sample, options)
        assert judged.reason or judged.alpha > 1
        json.dumps(as_document(judged), allow_nan=False)


@pytest.mark.parametrize("counting", ["measured", "whole"])
def test_a_million_ties_give_an_answer_without_a_warning(counting):
    """The rivals' fits have hardly anything to go by in the twelve largest, all but alike."""
    sample = Sample.of_sizes(EXTREME["a million ties"](None))
    judged = judge(sample, Options(replicates=20, counting=counting))
    assert judged.alpha > 1
    json.dumps(as_document(judged), allow_nan=False)


@pytest.mark.parametrize("counting", ["measured", "whole"])
def test_thousands_of_millions_of_events_at_few_sizes_go_onto_the_grid(counting):
    """Each replicate of exact sizes would draw as many events, one by one."""
    sizes = np.arange(300.0, 800.0)
    counts = np.floor(1e13 * sizes**-2.5).astype(np.int64)
    judged = judge(Sample(sizes, counts), Options(replicates=20, counting=counting))
    assert (judged.n, judged.resolution) == (counts.sum(), "grid")
    assert any("are judged by their exact sizes" in sentence for sentence in judged.assumed)


STEEP = {
    "whole": Sample(np.array([1.0, 2.0, 18.0, 21.0, 444.0, 1126.0]), np.array([162, 635045, 7, 1304, 4580396, 1655])),
    "neighbours of 2^53": Sample.of_sizes(2.0**53 - np.arange(40)),
    "last digits": Sample.of_sizes(0.2297 * (1 + 1e-14 * np.arange(40))),
}


@pytest.mark.parametrize("kind", STEEP)
@pytest.mark.parametrize("counting", ["measured", "whole"])
def test_steep_tails_give_an_answer_without_a_warning(kind, counting):
    """Exponents of hundreds and more, where zeta is no double any more, and a limit far beyond."""
    options = Options(counting=counting, replicates=0, limit=9e17, period_days=30.0, events_per_day=1e3, min_tail=2)
    judged = judge(STEEP[kind], options)
    assert judged.reason or judged.alpha > 1
    if judged.alpha is not None and judged.alpha > 20:
        assert judged.top_share.share == pytest.approx(0.2, rel=0.05)
    json.dumps(as_document(judged), allow_nan=False)


def said_of(sizes, **options):
    return judge(Sample.of_sizes(sizes), Options(rivals=False, **options)).warnings


def test_a_cap_and_rounding_are_told_once_in_the_warnings():
    x = (np.random.default_rng(5).pareto(1.5, 5000) + 1) * 1000
    assert sum("looks like a cap" in sentence for sentence in said_of(np.minimum(x, 30_000), replicates=50)) == 1
    (told,) = [sentence for sentence in said_of(np.round(x / 200) * 200, replicates=50) if "multiples" in sentence]
    assert "multiples of 200" in told
    assert re.match(r"all \d+ tail events are multiples", told)


def test_without_a_tail_the_cap_is_told_all_the_same():
    judged = judge(Sample(np.array([1.0, 2.0, 3.0]), np.array([5, 5, 400])), Options(xmin=3.0))
    assert judged.alpha is None
    assert sum("looks like a cap" in sentence for sentence in judged.warnings) == 1


def test_an_infinite_mean_is_told_once():
    x = np.random.default_rng(6).pareto(0.6, 3000) + 1
    said = said_of(x, replicates=250)
    assert sum("mean of this tail" in sentence for sentence in said) == 1
    assert not any("variance" in sentence for sentence in said)


def test_everything_compiles():
    compile_everything()
