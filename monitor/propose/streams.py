"""Which field could name the streams, and what could be watched in each."""

from __future__ import annotations

from monitor.parse.blocks import usable_name
from monitor.parse.lines import Field
from monitor.propose.columns import Column, Table
from monitor.propose.records import StreamField, Watchable
from monitor.propose.vocabulary import NO_PLACE, PLACE

MOST_STREAMS = 200
FEWEST_EACH = 20
BASELINE_TAIL = 500
TAIL_SHARE = 0.1
"""Assumed for the estimates: one event in ten is in the tail. Common practice for a first guess."""


def find_streams(table: Table, taken: set[Field | None]) -> tuple[StreamField, ...]:
    """Fields with few different texts, the likeliest first. taken: fields that are the size or times."""
    found = [f for c in table.columns if c.field not in taken and (f := _stream(c, table)) is not None]
    return tuple(sorted(found, key=lambda f: -f.score))


def _stream(column: Column, table: Table) -> StreamField | None:
    values, present = len(column.counts), column.present
    assert column.field is not None or table.lines == "number"
    if column.field is None or not 2 <= values <= MOST_STREAMS or present < 0.98 * table.rows:
        return None
    if column.numeric > 0.5 and not (column.whole and column.words & PLACE):
        return None
    if not all(usable_name(name) for name in column.counts):
        return None
    usual = sum(count >= FEWEST_EACH for count in column.counts.values())
    if usual < 2 or sum(c for c in column.counts.values() if c < FEWEST_EACH) > 0.1 * present:
        return None
    score = 1.0 + 2.0 * bool(column.words & PLACE) - 2.0 * bool(column.words & NO_PLACE)
    score -= 0.5 * (values > 50) + 0.5 * (max(column.counts.values()) > 0.95 * present)
    names = [name for name, _ in column.counts.most_common(4)]
    evidence = f"{values} different values in the sample: {', '.join(names)}{', ...' if values > 4 else ''}"
    return StreamField(field=column.field, values=values, score=score, evidence=evidence)


def watchable(name: str, share: float, events_per_day: float | None, window_days: float) -> Watchable:
    """What watching could make of a stream with so many events a day."""
    if events_per_day is None or events_per_day <= 0:
        words = "events a day not known: no times"
        return Watchable(stream=name, share=share, events_per_day=None, days_to_baseline=None, words=words)
    days = BASELINE_TAIL / TAIL_SHARE / events_per_day
    words = f"about {_number(events_per_day)} events a day; a baseline after {_span(days)}"
    if days > window_days:
        words += (
            f", longer than the window of {window_days:g} days, so none comes: lower baseline_tail, give "
            "[stream.NAME.plan], or take fewer, larger streams"
        )
    return Watchable(stream=name, share=share, events_per_day=events_per_day, days_to_baseline=days, words=words)


def _number(value: float) -> str:
    return f"{value:.2g}" if value < 10 else f"{round(value, 2 - len(str(int(value)))):.0f}"


def _span(days: float) -> str:
    for unit, length in (("years", 365.25), ("days", 1.0), ("hours", 1 / 24), ("minutes", 1 / 1440)):
        if days >= 2 * length:
            return f"{_number(days / length)} {unit}"
    return "a few minutes"
