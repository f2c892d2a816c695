"""Effective times: a plain twin line by line, and independence of batching."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.engine import clockwork
from monitor.engine.clockwork import Rules, effective_times

RULES = Rules(lateness=10, ahead=100)

stamps_lists = st.lists(st.one_of(st.integers(0, 60), st.integers(0, 1000)), max_size=30)


def plain(stamps: list[int], edge: int | None) -> tuple[list[tuple[int, int, bool]], list[int], int | None]:
    """The rule read aloud: one line after the other, the next one confirming the one that waits."""
    out: list[tuple[int, int, bool]] = []
    refused: list[int] = []
    top: int | None = None
    waiting: int | None = None

    def accept(i: int) -> None:
        nonlocal top
        stamp = stamps[i]
        floor = stamp if top is None else top - RULES.lateness
        if edge is not None:
            floor = max(floor, edge) if top is not None else max(stamp - RULES.lateness, edge)
        out.append((i, max(stamp, floor), stamp < floor))
        top = stamp if top is None else max(top, stamp)

    for i, stamp in enumerate(stamps):
        if waiting is not None:
            held = stamps[waiting]
            confirmed = stamp >= held - RULES.ahead if top is None else stamp - top > RULES.ahead
            if confirmed:
                accept(waiting)
            else:
                refused.append(waiting)
            waiting = None
        if top is None or stamp - top > RULES.ahead:
            waiting = i
        else:
            accept(i)
    return out, refused, waiting


def in_batches(
    stamps: list[int], cuts: list[int], edge: int | None
) -> tuple[list[tuple[int, int, bool]], list[int], int | None]:
    out: list[tuple[int, int, bool]] = []
    refused: list[int] = []
    waiting: int | None = None
    top: int | None = None
    bounds = sorted({0, len(stamps), *(cut for cut in cuts if cut < len(stamps))})
    for low, high in itertools.pairwise(bounds):
        index = ([] if waiting is None else [waiting]) + list(range(low, high))
        timed = effective_times(
            np.array([stamps[i] for i in index], np.int64), top, edge, RULES, waits=waiting is not None
        )
        out += [
            (index[i], int(when), bool(late))
            for i, when, late in zip(timed.accepted, timed.effective, timed.late, strict=True)
        ]
        refused += [index[i] for i in timed.refused]
        waiting = None if timed.waiting is None else index[timed.waiting]
        top = timed.running_max
    return out, refused, waiting


@given(stamps_lists, st.lists(st.integers(1, 30), max_size=5), st.none() | st.integers(0, 500))
@settings(max_examples=500)
def test_batches_do_not_matter(stamps: list[int], cuts: list[int], edge: int | None) -> None:
    assert in_batches(stamps, cuts, edge) == plain(stamps, edge)


@given(stamps_lists, st.lists(st.integers(1, 30), max_size=5), st.integers(0, 3))
def test_looking_ahead_for_the_next_jump_changes_nothing(stamps: list[int], cuts: list[int], looks: int) -> None:
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(clockwork, "_MOST_LOOKS", looks)
        assert in_batches(stamps, cuts, None) == plain(stamps, None)


@given(stamps_lists)
def test_no_effective_time_lies_below_an_earlier_floor(stamps: list[int]) -> None:
    out, refused, waiting = in_batches(stamps, [], None)
    assert len(out) + len(refused) + (waiting is not None) == len(stamps)
    top = -1_000_000
    for i, when, late in out:
        assert when >= top - RULES.lateness
        assert late == (when > stamps[i])
        top = max(top, stamps[i])


def test_a_lone_stamp_from_the_far_future_is_refused_and_moves_nothing() -> None:
    out, refused, waiting = in_batches([1, 2, 5000, 3, 4], [], None)
    assert refused == [2]
    assert waiting is None
    assert [when for _, when, _ in out] == [1, 2, 3, 4]


def test_a_gap_that_the_next_line_bears_out_counts() -> None:
    out, refused, _ = in_batches([1, 2, 5000, 5001], [], None)
    assert refused == []
    assert [when for _, when, _ in out] == [1, 2, 5000, 5001]


def test_a_first_line_from_the_far_future_does_not_poison_its_chain() -> None:
    out, refused, _ = in_batches([90_000, 1, 2, 3], [], None)
    assert refused == [0]
    assert [when for _, when, _ in out] == [1, 2, 3]
