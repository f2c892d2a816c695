"""Warnings about shape: they speak of what was planted, and stay silent on genuine tails."""

import numpy as np
import pytest

from monitor.tail.sample import Sample
from monitor.tail.shape import misfit_warning, moment_warnings, shape_warnings
from storage.grid import cell_of


def warned(sizes, xmin=None):
    sample = sizes if isinstance(sizes, Sample) else Sample.of_sizes(np.asarray(sizes, float))
    return shape_warnings(sample, float(sample.sizes[0]) if xmin is None else xmin)


def on_grid(sizes):
    cells, counts = np.unique(cell_of(sizes), return_counts=True)
    return Sample.of_cells(cells, counts)


def test_genuine_tails_are_silent():
    # 300 rounds of eight kinds, steepness 1.3 to 8, 20 to 1e5 events: the odds are 1e-6 each, so that 2400 samples
    # raise one false alarm in 400 runs (seed fixed).
    rng = np.random.default_rng(51)
    for _ in range(300):
        alpha, n, unit = rng.uniform(1.3, 8), int(10 ** rng.uniform(1.3, 5)), float(np.ceil(10 ** rng.uniform(0.8, 3)))
        x = rng.pareto(alpha - 1, n) + 1
        x = x[x < 1e12]
        zipf = rng.zipf(alpha, n)
        zipf = zipf[zipf < 10**12].astype(float)
        kinds = [
            x, np.floor(x * unit), zipf, on_grid(x * unit), np.round(x * unit * 100) / 100,
            np.ceil(np.exp(3 + rng.standard_normal(n))), np.ceil(100 * rng.standard_exponential(n)),
        ]  # fmt: skip
        kinds += [zipf[zipf >= low] for low in (3, 20) if (zipf >= low).sum() > 20]
        for sizes in kinds:
            assert warned(sizes) == ()


@pytest.mark.parametrize("unit", [1.0, 1e-3, 0.25])
def test_a_cap_is_seen(unit):
    x = np.floor((np.random.default_rng(52).pareto(1.5, 5000) + 1) * 1000) * unit
    (said,) = warned(np.minimum(x, 30_000 * unit))
    at_cap = int((x >= 30_000 * unit).sum())
    assert f"{at_cap} of 5 000 tail events have the largest size, {30_000 * unit:.6g}" in said


def test_a_cap_is_seen_on_the_grid():
    x = np.random.default_rng(53).pareto(1.5, 100_000) + 1
    assert "cap" in warned(on_grid(np.minimum(x, 100.0)))[0]


def test_a_smooth_end_is_no_cap():
    # Uniform percentages: one in a hundred has the largest size, as has every other.
    x = np.random.default_rng(54).integers(1, 101, 20_000).astype(float)
    assert warned(x) == ()
    assert warned(np.append(x, np.full(3000, 100.0)))  # but here a seventh of all


def test_all_sizes_rounded():
    x = (np.random.default_rng(55).pareto(1.5, 500) + 1) * 100
    (said,) = warned(np.round(x / 50) * 50)
    assert said.startswith("all 500 tail events are multiples of 50, which is 50% of xmin")
    (said,) = warned(np.round(x / 50) * 0.5)
    assert "multiples of 0.5" in said


def test_most_sizes_rounded():
    rng = np.random.default_rng(56)
    x = np.round((rng.pareto(1.5, 5000) + 1) * 100)
    x = np.where(rng.random(5000) < 0.7, np.round(x / 50) * 50, x)
    (said,) = warned(x, 100.0)
    assert "events above 400 are multiples of 50" in said


def test_whole_units_and_fine_rounding_are_no_news():
    x = (np.random.default_rng(57).pareto(1.5, 5000) + 1) * 100
    assert warned(np.round(x)) == ()
    assert warned(np.round(x / 5) * 5, 1000.0) == ()  # half a per cent of xmin


def test_few_sizes_share_a_step_by_chance():
    assert warned(np.array([100.0, 250.0, 400.0, 950.0])) == ()


def test_sizes_over_six_hundred_decades_raise_no_warning():
    assert warned(10.0 ** np.random.default_rng(58).uniform(-300, 300, 500)) == ()


@pytest.mark.parametrize(
    ("alpha", "interval", "words"),
    [
        (1.8, (1.7, 1.9), "the mean of this tail is infinite"),
        (2.1, (1.9, 2.3), "the mean of this tail may be infinite"),
        (1.95, None, "the mean of this tail may be infinite"),
        (2.5, (2.4, 2.6), "the variance of this tail is infinite"),
        (3.1, (2.9, 3.3), "the variance of this tail may be infinite"),
    ],
)
def test_moment_warnings(alpha, interval, words):
    (said,) = moment_warnings(alpha, interval)
    assert words in said


def test_no_moment_warning_for_a_light_tail():
    assert moment_warnings(3.6, (3.3, 3.9)) == ()


def test_misfit_as_an_effect_size():
    said = misfit_warning(1_000_000_000, 0.00391, 0.0)
    assert "nowhere more than 0.4 % of the tail off" in said
    assert "with 1 000 000 000 tail events" in said
    assert misfit_warning(10**9, 0.00391, 0.3) is None  # not ruled out
    assert misfit_warning(300, 0.09, 0.0) is None  # a real misfit
