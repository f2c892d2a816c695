"""What a person must know or decide before trusting the sizes: doubts, each with its evidence."""

from __future__ import annotations

import re
from collections.abc import Iterator

import numpy as np

from monitor.propose.columns import Column, Table
from monitor.propose.names import called
from monitor.propose.records import SizeCandidate, StreamField, TimeFound
from monitor.propose.times import MINUTE, as_floats, disorder_of, stamps_of
from monitor.propose.units import PER_UNIT, Duration
from monitor.propose.vocabulary import DURATION, IDENTIFIER_OF_EVENT

_CLOCK = re.compile(r"[0-2]?\d:\d\d(:\d\d)?")
_NEAR = 8
"""Lines within which a repeated id counts as standing together."""


def size_doubts(table: Table, size: Column, candidates: tuple[SizeCandidate, ...]) -> Iterator[str]:
    """Doubts about the size itself."""
    if len(candidates) > 1 and candidates[1].score > candidates[0].score - 1.5:
        others = ", ".join(called(c.field) for c in candidates[1:4])
        yield f"which field is the size: {called(candidates[0].field)} looks likeliest, but it could also be {others}"
    elif candidates[0].score < 2.0 and table.lines != "number":
        yield f"whether {called(candidates[0].field)} is the size at all: it only looks likelier than the other fields"
    negative, zero = int((size.numbers < 0).sum()), int((size.numbers == 0).sum())
    if negative:
        yield (
            f"{negative} of {size.numbers.size} sizes are negative (returns? corrections?). They are rejected and "
            "counted; what they take back stays in. If the line says what it is, keep the right ones with where"
        )
    if zero:
        yield f"{zero} of {size.numbers.size} sizes are zero; they are rejected and counted, since a tail has none"
    yield _counting(size)
    spread = float(size.positive[-1] / np.median(size.positive))
    if spread < 3:
        yield (
            f"whether there is a heavy tail at all: the largest sampled size is only {spread:.2g} times the median; "
            "a power law is a poor description of such sizes"
        )


def _counting(size: Column) -> str:
    start = f"all {size.numbers.size} sampled sizes are whole numbers" if size.whole else "sizes have fractions"
    if not size.whole:
        return (
            f'whole or measured: {start}, so "measured" (the continuous law) it is, unless they are averages of counts'
        )
    return (
        f"whole or measured: {start}, which decides nothing (a rounded weight is whole too). Things that are counted "
        f'(units, persons): set counting = "whole"; quantities that were rounded: leave "measured"'
    )


def repeated_ids(table: Table, size: Column) -> Iterator[str]:
    """Ids that stand on several lines close together: parts of events instead of events; whole lines written twice."""
    for column in table.columns:
        if column is size or not column.words & IDENTIFIER_OF_EVENT or column.present < 0.9 * table.rows:
            continue
        different = len(column.counts)
        if different < 20 or different > 0.95 * column.present or _near_repeats(column, table) < 0.5:
            continue
        name, most = column.counts.most_common(1)[0]
        yield (
            f"{called(column.field)} repeats on neighbouring lines: {column.present} lines, {different} different, one "
            f"on {most} lines ({name[:40]}). These look like parts (order lines) rather than whole events (orders). If "
            "the size you plan on is that of the whole, write a log with one line for each"
        )
    texts = list(zip(*[c.texts for c in table.columns], strict=True))
    again = len(texts) - len(set(texts))
    if len(table.columns) > 2 and again > 0.02 * len(texts):
        yield f"{again} of {len(texts)} sampled lines occur word for word before: are some events written twice?"


def no_log(table: Table, size: Column, times: tuple[TimeFound, ...]) -> Iterator[str]:
    """Sorted numbers, and tables of values with their counts, are no logs of events."""
    steps = size.steps(size.all_numbers)
    if steps.size >= 10 and ((steps >= 0).all() or (steps <= 0).all()):
        yield "the sizes stand sorted: this is no log in the order of events, so changes over time cannot be seen in it"
    if times:
        return
    for column in table.columns:
        steps = column.steps(column.all_numbers)
        sorted_once = steps.size >= 10 and ((steps > 0).all() or (steps < 0).all())
        if column is not size and sorted_once and size.whole and column.numeric == 1 and len(table.columns) <= 3:
            yield (
                f"each {called(column.field)} stands on one line, in order: this looks like a table of values and how "
                "often each occurred, not like a log with one line for each event, which is what is needed"
            )
            return


def _near_repeats(column: Column, table: Table) -> float:
    """Of the lines whose id occurred before in their piece, the share that follow it within a few lines."""
    last: dict[tuple[int, str], int] = {}
    near = again = 0
    for i, (piece, text) in enumerate(zip(table.pieces.tolist(), column.texts, strict=True)):
        if text is None:
            continue
        before = last.get((piece, text))
        again += before is not None
        near += before is not None and i - before <= _NEAR
        last[piece, text] = i
    return near / again if again >= 10 else 0.0


def time_doubts(
    table: Table, size: Column, times: tuple[TimeFound, ...], duration: Duration | None
) -> Iterator[str]:  # fmt: skip
    """Doubts about the event time."""
    if not times:
        yield (
            "no field holds a time: events count at the time they arrive, so old logs cannot be taken in by their own "
            "dates, and a restart moves events between panes"
        )
        return
    time = times[0]
    if not time.zoned:
        yield (
            f"{called(time.field)} does not say its time zone; it is read as UTC. If the clock that wrote it is "
            "another, set timezone (with daylight saving: the hour that occurs twice in autumn is taken as its first)"
        )
    if time.kind.startswith("dates"):
        yield (
            f"{called(time.field)} holds dates only: all events of a day count at its midnight, so panes cannot be "
            "under 1d"
        )
        clock = next((c for c in table.columns if _times_of_day(c)), None)
        if clock is not None:
            yield (
                f"the time of day stands in {called(clock.field)}, apart from its date; one field is read, so let the "
                "writer put both into one"
            )
    if len(times) > 1:
        others = ", ".join(called(t.field) for t in times[1:4])
        yield f"which time counts: {called(time.field)} was taken; there is also {others}"
    yield from _start_stamps(table, size, time, duration)


def _times_of_day(column: Column) -> bool:
    return column.present > 0 and sum(bool(_CLOCK.match(text)) for text in column.counts) > 0.9 * len(column.counts)


def _start_stamps(table: Table, size: Column, time: TimeFound, duration: Duration | None) -> Iterator[str]:
    if duration is not None:
        chosen = "its end" if time.field == duration.end.field else "its start"
        yield (
            f"the size is a duration ({called(duration.end.field)} minus {called(duration.start.field)}), and the "
            f"event is dated by {chosen}. Dated by its start, a long one comes in late by its whole length; by "
            "its end it is on time"
        )
        return
    if not size.words & DURATION:
        return
    stamps = stamps_of(next(c for c in table.columns if c.field == time.field), time.unit)
    before = disorder_of(stamps, table.pieces)[1]
    for unit, ns in PER_UNIT.items():
        ends = as_floats(stamps) + np.nan_to_num(size.all_numbers) * ns
        steps = size.steps(ends)
        if steps.size >= 20 and before > 0.02 and (steps < -1e9).mean() < 0.2 * before:
            yield (
                f"{called(time.field)} looks like the start of the event: with {called(size.field)} (in {unit}) "
                "added to it, the lines are in order, without it they are not. The longest events come in late by "
                "their whole length: write the end too, or set lateness to the longest that matters"
            )
            return


def stream_doubts(streams: tuple[StreamField, ...]) -> Iterator[str]:
    """Doubts about the streams."""
    if streams and streams[0].score > 0:
        others = [called(s.field) for s in streams[1:5]]
        if others:
            taken = called(streams[0].field)
            yield f"what a stream is: one a value of {taken} was taken; it could also be {', '.join(others)}"
    elif streams:
        others = [called(s.field) for s in streams[:4]]
        yield f"what a stream is: all lines are one stream; they could be told apart by {', '.join(others)}"


def lateness_for(time: TimeFound | None) -> str:
    """The setting that covers 999 in 1000 sampled lines, at least two minutes."""
    behind = 0 if time is None else time.disorder
    for minutes, text in ((2, "2m"), (10, "10m"), (30, "30m"), (60, "1h"), (360, "6h"), (1440, "1d"), (4320, "3d")):
        if behind <= minutes * MINUTE:
            return text
    return "7d"
