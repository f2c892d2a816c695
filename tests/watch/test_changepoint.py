"""Since when: coverage of the set, ramp or step, sizes and shares, and what is said when little is known."""

from __future__ import annotations

from math import log

import msgspec
import numpy as np
import pytest

from monitor.watch.changepoint import Change, History, changed, share_history, size_history
from monitor.watch.scores import Past
from monitor.watch.slots import SlotFacts
from tests.watch.streams import DAY, HOUR, YARDSTICK, power_law, stream_of


def history(y, before=Past(), a_slot=1):  # noqa: B008
    """Values cut into slots of `a_slot` each, a second apart."""
    slots = y.reshape(-1, a_slot)
    k = slots.shape[0]
    return History(
        starts=np.arange(k) * 10**9,
        end_ns=k * 10**9,
        counts=np.full(k, a_slot),
        sums=slots.sum(axis=1),
        weights=np.full(k, float(a_slot)),
        before=before,
    )


@pytest.mark.parametrize(("factor", "grew"), [(1.2, True), (0.8, False)])
def test_the_set_covers_the_change(factor, grew):
    # 150 runs, 400 changed values after 3 000: promised 90 %, measured .93 to .97. At a true .93 fewer than 135
    # of 150 come in 6 of 100 seeds; the seed is fixed.
    rng = np.random.default_rng(31)
    covered = 0
    for _ in range(150):
        y = np.concatenate((rng.standard_exponential(1000), rng.standard_exponential(400) * factor))
        found = changed(history(y, Past(2000.0, rng.gamma(2000.0))), grew)
        covered += found.from_ns <= 1000 * 10**9 < found.to_ns
    assert covered >= 135


def test_posterior_is_the_formula_value_by_value():
    # Second implementation: the likelihood ratio of statistics of ratios, one nu at a time.
    y = np.random.default_rng(1).standard_exponential(40)
    y[25:] *= 3.0
    found = changed(history(y, Past(5.0, 4.0)), True)
    thetas = np.exp(np.linspace(0.03, 1.0, 25))
    best, n, total = None, 45, 4.0 + y.sum()
    for nu in range(40):
        after = y[nu:].sum()
        ratio = np.mean([t ** -(40 - nu) * (total / (total - after + after / t)) ** n for t in thetas])
        best = max(best or (0.0, 0), (ratio, nu))
    assert found.at_ns == best[1] * 10**9
    assert found.after == pytest.approx(y[best[1] :].mean())
    assert found.before == pytest.approx((4.0 + y[: best[1]].sum()) / (5 + best[1]))
    assert found.counted == 40 - best[1]


def test_steps_and_ramps_are_told_apart():
    # A ramp from 2.5 towards 1.75 over 3 000 values, or at once; 20 of each.
    # The wrong word never, the right one mostly.
    rng = np.random.default_rng(2)
    said = {"step": [], "ramp": []}
    for _ in range(20):
        calm = rng.standard_exponential(2000)
        late = rng.standard_exponential(3000)
        before = Past(3000.0, rng.gamma(3000.0))
        said["step"].append(changed(history(np.concatenate((calm, late * 2.0)), before, 10), True).shape)
        grown = late * np.exp(np.linspace(0, log(2.0), 3000))
        said["ramp"].append(changed(history(np.concatenate((calm, grown)), before, 10), True).shape)
    for shape, other in (("step", "ramp"), ("ramp", "step")):
        assert said[shape].count(shape) >= 15
        assert other not in said[shape]


def test_slots_of_a_stream_give_time_and_size_of_a_change():
    calm = stream_of(1, 40, length=HOUR, rate=1200.0)
    after = stream_of(1, 10, start=40 * DAY, length=HOUR, rate=1200.0, draw=power_law(2.1), share=0.16)
    slots = calm + after
    m = sum(slot.exceedances for slot in slots)
    sizes = size_history(slots, YARDSTICK, Past(m + 1000.0, 0.0))
    total = float(sizes.sums.sum())
    sizes = size_history(slots, YARDSTICK, Past(m + 1000.0, total + 1000.0 / 1.5))
    assert sizes.before.n == pytest.approx(1000.0)
    found = changed(sizes, True)
    assert abs(found.at_ns - 40 * DAY) < DAY
    assert found.from_ns <= 40 * DAY <= found.to_ns
    assert 1 + 1 / found.before == pytest.approx(2.5, abs=0.08)
    assert 1 + 1 / found.after == pytest.approx(2.1, abs=0.1)
    shares = changed(share_history(slots, Past()), False)
    assert abs(shares.at_ns - 40 * DAY) < DAY
    assert 1 / (shares.after + 0.5) == pytest.approx(0.16, abs=0.015)
    assert 1 / (shares.before + 0.5) == pytest.approx(0.10, abs=0.01)


def test_a_vanished_tail_has_a_moment_too():
    slots = stream_of(2, 20, length=HOUR) + stream_of(2, 5, start=20 * DAY, length=HOUR, share=0.0)
    found = changed(share_history(slots, Past()), True)
    assert abs(found.at_ns - 20 * DAY) <= 8 * HOUR
    assert found.counted <= 3
    assert found.shape == "unclear"


def test_a_known_exponent_is_used_as_known():
    y = np.concatenate((np.ones(50), np.full(30, 2.0)))
    found = changed(history(y, Past(1.0, 1.0, known=True)), True)
    assert found.at_ns == 50 * 10**9
    assert found.from_ns <= found.at_ns < found.to_ns


def test_nothing_to_search_and_json():
    empty = [SlotFacts(stream="s", start_ns=0, length_ns=HOUR)]
    assert changed(size_history(empty, YARDSTICK, Past(9.0, 9.0)), True) is None
    found = changed(history(np.random.default_rng(1).standard_exponential(50)), True)
    assert msgspec.json.decode(msgspec.json.encode(found), type=Change) == found
