"""Slot facts add up whatever the order; the order inside a slot depends on nothing but the slot."""

from __future__ import annotations

import msgspec
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.watch.slots import Counted, SlotFacts, Yardstick, add, facts_of, ordered
from storage.grid import CELL_WIDTH, cell_of, edges

YARD = Yardstick(xmin=100.0, passage=500.0)
SLOT = SlotFacts(stream="north", start_ns=7, length_ns=60)
sizes_list = st.lists(st.floats(1.0, 1e6) | st.sampled_from([100.0, 150.0, 99.999, 500.0]), max_size=30)


def facts(sizes, yardstick=YARD, distinct=8, **slot):
    named = msgspec.structs.replace(SLOT, **slot)
    return facts_of(np.array(sizes, float), np.ones(len(sizes), np.int64), named, yardstick, distinct)


@given(st.lists(sizes_list, min_size=1, max_size=5), st.randoms(use_true_random=False))
def test_parts_add_up_in_any_order_to_what_came_at_once(parts, random):
    at_once = facts([size for part in parts for size in part])
    made = [facts(part) for part in parts]
    random.shuffle(made)
    assert add(made, 8) == at_once
    folded = made[0]
    for part in made[1:]:
        folded = add([folded, part], 8)
    assert folded == at_once


@given(sizes_list)
def test_facts_are_counted_by_hand(sizes):
    made = facts(sizes, distinct=1000)
    assert made.events == len(sizes)
    assert made.exceedances == sum(size >= 100.0 for size in sizes)
    assert made.passages == sum(size > 500.0 for size in sizes)
    assert made.largest == (max(sizes) if sizes else None)
    assert made.body.total == len(sizes)
    assert sorted(s for s, n in zip(made.sizes, made.counts, strict=True) for _ in range(n)) == sorted(
        size for size in sizes if size >= 100.0
    )


@given(sizes_list, st.randoms(use_true_random=False))
def test_order_of_arrival_changes_nothing(sizes, random):
    shuffled = list(sizes)
    random.shuffle(shuffled)
    one, other = ordered(facts(sizes), YARD), ordered(facts(shuffled), YARD)
    assert one.y.tolist() == other.y.tolist()
    assert one.places.tolist() == other.places.tolist()


def test_lines_add_up_and_foreign_slots_are_refused():
    both = add([msgspec.structs.replace(SLOT, lines=3, rejected=1), msgspec.structs.replace(SLOT, lines=4)])
    assert (both.lines, both.rejected) == (7, 1)
    with pytest.raises(ValueError, match="different slots"):
        add([SLOT, msgspec.structs.replace(SLOT, start_ns=8)])
    with pytest.raises(ValueError, match="no slots"):
        add([])


def test_order_differs_from_slot_to_slot_and_from_stream_to_stream():
    sizes = list(np.linspace(101.0, 900.0, 40))
    orders = {
        tuple(ordered(facts(sizes, distinct=99, **change), YARD).y.tolist())
        for change in ({}, {"start_ns": 8}, {"stream": "south"})
    }
    assert len(orders) == 3


def test_log_sizes_of_measured_whole_and_gridded_sizes():
    sizes = [100.0, 250.0, 90.0]
    assert sorted(ordered(facts(sizes), YARD).y) == pytest.approx([0.0, np.log(2.5)])
    whole = Yardstick(xmin=100.0, counting="whole")
    assert sorted(ordered(facts(sizes, whole), whole).y) == pytest.approx(np.log(np.array([100, 250]) / 99.5))
    k0 = int(cell_of(np.array([100.0]))[0])
    grid = Yardstick(xmin=float(edges(np.array([k0]))[0]), k0=k0)
    steps = (np.array([0, int(cell_of(np.array([250.0]))[0]) - k0]) + 0.5) * CELL_WIDTH
    assert sorted(ordered(facts(sizes, grid), grid).y) == pytest.approx(steps)


def test_a_crowded_slot_of_an_exact_baseline_is_scored_within_half_a_cell():
    sizes = 100.0 * np.exp(np.linspace(0.0, 2.0, 300))
    exact, crowded = facts(sizes, distinct=1000), facts(sizes, distinct=8)
    assert crowded.cells is not None
    assert crowded.exceedances == exact.exceedances == 300
    off = np.sort(ordered(crowded, YARD).y) - np.sort(ordered(exact, YARD).y)
    assert np.abs(off).max() <= 0.5 * CELL_WIDTH + 1e-9


@given(sizes_list)
def test_facts_survive_json(sizes):
    made = facts(sizes)
    assert msgspec.json.decode(msgspec.json.encode(made), type=SlotFacts) == made
    assert Counted().total == 0
