"""Slots: the facts of one short time slice of a stream that watching needs, and the order of events inside it.

A slot's facts are additive: numbers of events, lines and passages, and the multiset of its exceedances (events
at or above the frozen xmin). Adding them is associative and commutative and exact, so that a slot never depends
on batching, restarts or on which process read which line.

Sequential scores need an order, and the order of arrival depends on luck. So the order is drawn by a generator
keyed on stream and slot start (monitor.watch.keyed): the exceedances, ascending, are permuted, and their places
among the slot's events are a uniformly random subset. Why the law stays exact: if the events of a slot are
independent and alike (or only exchangeable) given their number, then the sequence (event is an exceedance or not,
its size) has the same law as any random rearrangement of its own multiset. Nothing is lost and nothing gained
while there is no change; a change inside a slot is seen at the slot's resolution.
"""

from __future__ import annotations

from collections.abc import Iterable
from math import log
from typing import Literal

import msgspec
import numpy as np
from numpy.typing import NDArray

from monitor.watch.keyed import key_of, permutation, subset
from storage.grid import CELL_WIDTH, cell_of

DISTINCT = 1024
"""Different exceedance sizes a slot keeps exactly; beyond that it goes onto the grid."""

BODY_CELLS = 32
"""Grid cells in one cell of the body's histogram: sixteen to a factor of ten."""


class Counted(msgspec.Struct, frozen=True, array_like=True):
    """A multiset of whole numbers: values ascending and distinct, and how often each occurs."""

    values: tuple[int, ...] = ()
    counts: tuple[int, ...] = ()

    @property
    def total(self) -> int:
        """How many there are."""
        return sum(self.counts)


class SlotFacts(msgspec.Struct, frozen=True, kw_only=True):
    """What watching knows of one slot.

    stream, start_ns, length_ns  which slot (ns since 1970 UTC, ns)
    hour       hour of the week where the stream lives, 0 = Monday 00-01; -1 when the watch needs none
    events     events of the slot, of any size
    sizes, counts  exceedances of the frozen xmin, exact: ascending distinct sizes and their counts
    cells      the same on the grid, when they are too many different ones (then sizes is empty)
    passages   events above the size that is watched by the level rule
    largest    the largest size, None in an empty slot
    lines, rejected  lines read and lines that could not be used
    body       all sizes by coarse cell (grid cell // BODY_CELLS)
    """

    stream: str
    start_ns: int
    length_ns: int
    hour: int = -1
    events: int = 0
    sizes: tuple[float, ...] = ()
    counts: tuple[int, ...] = ()
    cells: Counted | None = None
    passages: int = 0
    largest: float | None = None
    lines: int = 0
    rejected: int = 0
    body: Counted = Counted()

    @property
    def exceedances(self) -> int:
        """Events at or above the frozen xmin."""
        return self.cells.total if self.cells is not None else sum(self.counts)

    @property
    def end_ns(self) -> int:
        """The moment the slot ends."""
        return self.start_ns + self.length_ns

    @property
    def days(self) -> float:
        """Length of the slot in days: its part of the common clock."""
        return self.length_ns / 86_400e9


class Yardstick(msgspec.Struct, frozen=True, kw_only=True):
    """What decides whether an event is an exceedance, and how its size is scored. Frozen with the baseline.

    xmin      lower end of the tail, in the unit of the sizes; for a stream without a plausible power law the
              frozen 95 % quantile, or any other fixed size
    counting  'whole' for the discrete law (scores are then sound from xmin 5 on, better from 10)
    k0        the cell whose lower edge is xmin, when the baseline was judged on the grid
    passage   the size whose passages are counted for the level and single-event rules, or None
    """

    xmin: float
    counting: Literal["measured", "whole"] = "measured"
    k0: int | None = None
    passage: float | None = None


class Ordered(msgspec.Struct, frozen=True):
    """The events of a slot in their keyed order.

    y       float64 (m,): log sizes of the exceedances over xmin, >= 0
    places  int64 (m,): their places among the slot's events, ascending within 1..events
    """

    y: NDArray[np.float64]
    places: NDArray[np.int64]
    events: int


def facts_of(
    sizes: NDArray[np.float64],
    counts: NDArray[np.int64],
    slot: SlotFacts,
    yardstick: Yardstick,
    distinct: int = DISTINCT,
) -> SlotFacts:
    """`slot` (which names stream, time, hour and lines) filled with the sizes that fell into it.

    Parameters: sizes float64 (k,), positive, any order, repeats allowed; counts int64 (k,), >= 1. Serves live
    events (counts of 1) and stored panes alike.
    """
    if not sizes.size:
        return slot
    fine = cell_of(sizes)
    above = fine >= yardstick.k0 if yardstick.k0 is not None else sizes >= yardstick.xmin
    kept, kept_counts = _gathered(sizes[above], counts[above])
    cells = None
    if kept.size > distinct:
        cells = _counted(fine[above], counts[above])
        kept, kept_counts = kept[:0], kept_counts[:0]
    passed = 0 if yardstick.passage is None else int(counts[sizes > yardstick.passage].sum())
    return msgspec.structs.replace(
        slot,
        events=int(counts.sum()),
        sizes=tuple(kept.tolist()),
        counts=tuple(kept_counts.tolist()),
        cells=cells,
        passages=passed,
        largest=float(sizes.max()),
        body=_counted(fine // BODY_CELLS, counts),
    )


def add(parts: Iterable[SlotFacts], distinct: int = DISTINCT) -> SlotFacts:
    """The exact sum of parts of one slot, in any order. Raises ValueError without parts or for different slots."""
    found = list(parts)
    if not found:
        raise ValueError("the sum of no slots has no stream or time")
    first = found[0]
    if any((p.stream, p.start_ns, p.length_ns) != (first.stream, first.start_ns, first.length_ns) for p in found):
        raise ValueError("parts of different slots cannot be added")
    sizes, counts = _gathered(
        np.array([size for part in found for size in part.sizes]),
        np.array([count for part in found for count in part.counts], np.int64),
    )
    cells = None
    if sizes.size > distinct or any(part.cells is not None for part in found):
        gridded = [part.cells for part in found if part.cells is not None]
        cells = _sum([_counted(cell_of(sizes), counts), *gridded])
        sizes, counts = sizes[:0], counts[:0]
    extremes = [part.largest for part in found if part.largest is not None]
    return msgspec.structs.replace(
        first,
        events=sum(part.events for part in found),
        sizes=tuple(sizes.tolist()),
        counts=tuple(counts.tolist()),
        cells=cells,
        passages=sum(part.passages for part in found),
        largest=max(extremes) if extremes else None,
        lines=sum(part.lines for part in found),
        rejected=sum(part.rejected for part in found),
        body=_sum([part.body for part in found]),
    )


def ordered(slot: SlotFacts, yardstick: Yardstick) -> Ordered:
    """The slot's exceedances in their keyed order, as log sizes over xmin, and their places among its events.

    Log sizes: measured sizes ln(x / xmin); whole sizes ln(x / (xmin - 1/2)), which makes the discrete law nearly
    exponential from xmin 5 on; on the grid (k - k0 + 1/2) d with d the width of a cell. Of a baseline with exact
    sizes, a crowded slot's cells are scored at their middle, an error of at most d/2 = 0.0022 in a log size.
    """
    y, counts = _log_sizes(slot, yardstick)
    y = np.repeat(y, counts)
    m = int(y.size)
    if not m:
        return Ordered(y, np.empty(0, np.int64), slot.events)
    y = y[permutation(key_of("order", slot.stream, slot.start_ns), m)]
    return Ordered(y, subset(key_of("places", slot.stream, slot.start_ns), slot.events, m), slot.events)


def _log_sizes(slot: SlotFacts, yardstick: Yardstick) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    base = yardstick.xmin - 0.5 if yardstick.counting == "whole" else yardstick.xmin
    if slot.cells is None and yardstick.k0 is None:
        y = np.log(np.array(slot.sizes, np.float64) / base)
        return y, np.array(slot.counts, np.int64)
    gridded = slot.cells if slot.cells is not None else _of_exact(slot)
    cells = np.array(gridded.values, np.int64)
    counts = np.array(gridded.counts, np.int64)
    if yardstick.k0 is not None:
        return ((cells - yardstick.k0 + 0.5) * CELL_WIDTH).astype(np.float64), counts
    # xmin cuts its own cell: the part above it may lie on either side of the cell's middle.
    return np.maximum((cells + 0.5) * CELL_WIDTH - log(base), 0.25 * CELL_WIDTH), counts


def _of_exact(slot: SlotFacts) -> Counted:
    return _counted(cell_of(np.array(slot.sizes, np.float64)), np.array(slot.counts, np.int64))


def _gathered(sizes: NDArray[np.float64], counts: NDArray[np.int64]) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    """Distinct sizes ascending with their summed counts."""
    distinct, place = np.unique(sizes, return_inverse=True)
    summed = np.zeros(distinct.size, np.int64)
    np.add.at(summed, place, counts)
    return distinct, summed


def _counted(values: NDArray[np.int64], counts: NDArray[np.int64]) -> Counted:
    distinct, place = np.unique(values, return_inverse=True)
    summed = np.zeros(distinct.size, np.int64)
    np.add.at(summed, place, counts)
    return Counted(tuple(distinct.tolist()), tuple(summed.tolist()))


def _sum(parts: list[Counted]) -> Counted:
    return _counted(
        np.array([value for part in parts for value in part.values], np.int64),
        np.array([count for part in parts for count in part.counts], np.int64),
    )
