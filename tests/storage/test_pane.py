"""Panes add up exactly: whatever the batches, whatever the order."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from storage import gathering
from storage.errors import StoreCorrupt
from storage.gathering import PaneBuilder, build_panes
from storage.pane import (
    EMPTY,
    LARGEST_KEPT,
    Pane,
    add,
    decode,
    digest,
    encode,
    line_digest,
)

DISTINCT = 40  # small, so that panes get crowded within a test

Event = tuple[float, int, bool, int]  # size, time, late, number of its line

events = st.lists(
    st.tuples(
        st.one_of(st.integers(1, 60).map(float), st.floats(0.001, 1e9)),
        st.integers(0, 5),
        st.booleans(),
        st.integers(0, 3),
    ),
    max_size=120,
)


def built(batches: list[list[Event]], distinct: int = DISTINCT) -> Pane:
    """One builder fed batch by batch."""
    builder = PaneBuilder()
    for batch in batches:
        if batch:
            feed(builder, batch)
    return builder.build(distinct)


def feed(builder: PaneBuilder, batch: list[Event]) -> None:
    def describe(i: int) -> tuple[str, str]:
        return line_digest(repr(batch[i]).encode()), f"line {i}"

    sizes, times = np.array([event[0] for event in batch]), np.array([event[1] for event in batch], np.int64)
    builder.add(sizes, times, sum(event[2] for event in batch), describe)


def cut(listed: list[Any], cuts: list[int]) -> list[list[Any]]:
    edges = sorted(min(c, len(listed)) for c in cuts)
    return [listed[a:b] for a, b in zip([0, *edges], [*edges, len(listed)], strict=True)]


@given(events, st.lists(st.integers(0, 120), max_size=6), st.randoms(use_true_random=False))
@settings(max_examples=200)
def test_content_is_independent_of_batches_order_and_partition(
    listed: list[Event], cuts: list[int], random: Any
) -> None:
    whole = built([listed])
    shuffled = list(listed)
    random.shuffle(shuffled)
    parts = cut(shuffled, cuts)
    assert digest(built(parts)) == digest(whole)
    separate = [built([part]) for part in parts]
    assert digest(add(separate, DISTINCT)) == digest(whole)
    assert digest(add(reversed(separate), DISTINCT)) == digest(whole)


@given(events, events, events)
def test_addition_is_associative_and_commutative(a: list[Event], b: list[Event], c: list[Event]) -> None:
    x, y, z = built([a]), built([b]), built([c])
    left = add([add([x, y], DISTINCT), z], DISTINCT)
    right = add([x, add([z, y], DISTINCT)], DISTINCT)
    assert digest(left) == digest(right)
    assert left.n == len(a) + len(b) + len(c)


@given(events)
def test_nothing_is_lost_on_the_grid(listed: list[Event]) -> None:
    pane = built([listed])
    distinct = {event[0] for event in listed}
    assert pane.resolution == ("grid" if len(distinct) > DISTINCT else "exact")
    assert pane.n == len(listed)
    assert pane.late == sum(event[2] for event in listed)
    if listed:
        assert pane.smallest == min(distinct)
        assert pane.largest == max(distinct)


@given(events)
def test_the_largest_events_are_the_first_in_their_order(listed: list[Event]) -> None:
    pane = built([listed], distinct=1000)
    keys = sorted((-size, time, line_digest(repr((size, time, late, no)).encode())) for size, time, late, no in listed)
    assert [event.rank for event in pane.largest_events] == keys[:LARGEST_KEPT]


@given(events)
def test_a_blob_gives_the_pane_back(listed: list[Event]) -> None:
    pane = built([listed])
    again = decode(encode(pane))
    assert digest(again) == digest(pane)
    assert again.largest_events == pane.largest_events
    assert again.counts.tolist() == pane.counts.tolist()


@given(events.filter(bool), st.data())
def test_one_changed_bit_is_found(listed: list[Event], data: st.DataObject) -> None:
    blob = bytearray(encode(built([listed])))
    bit = data.draw(st.integers(0, 8 * len(blob) - 1))
    blob[bit // 8] ^= 1 << bit % 8
    with pytest.raises(StoreCorrupt, match="pane's content"):
        decode(bytes(blob))


def test_many_events_of_one_size_keep_the_earliest() -> None:
    listed = [(1.0, time, False, 0) for time in range(500)]
    pane = built(cut(listed[::-1], [100, 250]))
    assert [event.time for event in pane.largest_events] == list(range(LARGEST_KEPT))


def test_an_empty_pane_adds_nothing() -> None:
    pane = built([[(2.0, 1, True, 0)]])
    assert digest(add([EMPTY, pane, EMPTY], DISTINCT)) == digest(pane)
    assert add([], DISTINCT).n == 0


@given(events, st.lists(st.integers(0, 120), max_size=6), st.sampled_from([1, 3, 1000]))
@settings(max_examples=200)
def test_a_builder_that_goes_on_after_each_part_makes_parts_of_the_same_sum(
    listed: list[Event], cuts: list[int], repeats: int
) -> None:
    listed = listed * 3 if repeats == 3 else listed  # many ties in size and time
    builder, parts = PaneBuilder(), []
    for batch in cut(listed, cuts):
        if batch:
            feed(builder, batch)
        parts.append(builder.build(DISTINCT if repeats != 1000 else 10**6))
    distinct = DISTINCT if repeats != 1000 else 10**6
    assert digest(add(parts, distinct)) == digest(built([listed], distinct))


@given(st.lists(events, max_size=8), st.sampled_from([1, 5, 2048]))
@settings(max_examples=100)
def test_building_many_at_once_gives_what_each_alone_gives(several: list[list[Event]], alone: int) -> None:
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(gathering, "_FEWEST_ALONE", alone)
        builders = [PaneBuilder() for _ in several]
        for builder, listed in zip(builders, several, strict=True):
            if listed:
                feed(builder, listed)
        together = [digest(pane) for pane in build_panes(builders, DISTINCT)]
    for listed, found in zip(several, together, strict=True):
        sizes = sorted({event[0] for event in listed})
        plain = built([listed])
        assert found == digest(plain)
        if plain.cells is None:
            assert plain.sizes.tolist() == sizes
            assert plain.counts.tolist() == [sum(event[0] == size for event in listed) for size in sizes]


def test_only_what_can_be_among_the_largest_is_ever_described() -> None:
    chance, asked = np.random.default_rng(5), []
    builder = PaneBuilder()
    for part in range(50):
        sizes = chance.pareto(1.5, 2000) + 1

        def describe(i: int, part: int = part) -> tuple[str, str]:
            asked.append((part, i))
            return line_digest(b"%d %d" % (part, i)), ""

        builder.add(sizes, np.arange(2000) + 2000 * part, 0, describe)
        builder.build(10**6)
    assert len(asked) >= 32
    # The k-th event is among the 32 largest so far with probability 32/k: 32 (1 + ln(100000/32)) = 290 in all.
    # Its standard deviation is below sqrt(290) = 17; eight of them are never exceeded.
    assert len(asked) < 290 + 8 * 17
