"""Known changes out of an iCalendar text (RFC 5545): one for each occurrence of each event.

Events that cannot be understood are refused one by one, in words; the others are taken.
"""

from __future__ import annotations

from datetime import timedelta

import msgspec

from monitor.alarms.calendar_text import CalendarError, Component, components, plain_text, text_list
from monitor.alarms.calendar_times import SECOND, Span, WallTime, duration, occurrences, repetition, wall_time
from monitor.alarms.known import EFFECTS, Effect, KnownChange


class Calendar(msgspec.Struct, frozen=True, kw_only=True):
    """What a calendar text says: its changes by time, and a sentence for each event that was refused."""

    known: tuple[KnownChange, ...]
    refused: tuple[str, ...]


class Reading(msgspec.Struct, frozen=True, kw_only=True):
    """How a calendar is read.

    timezone  zone of times that name none
    streams   pattern of the streams that its events concern
    effect    of events without a category that is one of the effects
    start, end  only occurrences that touch [start, end) (ns) are wanted; a repetition without an end needs that
    """

    timezone: str
    streams: str = "*"
    effect: Effect = "hold notices"
    start: int
    end: int


def read_calendar(text: str, how: Reading) -> Calendar:
    """The known changes that an iCalendar text announces. Never raises: what is wrong is told in `refused`."""
    try:
        events = [one for one in components(text) if one.name == "VEVENT"]
    except CalendarError as error:
        return Calendar(known=(), refused=(f"{error}.",))
    moved = _moved_starts(events, how)
    found: list[KnownChange] = []
    refused: list[str] = []
    for event in events:
        try:
            found += _changes(event, how, moved)
        except CalendarError as error:
            refused.append(f"{error}.")
    return Calendar(
        known=tuple(sorted(found, key=lambda one: (one.start, one.end, one.reason))), refused=tuple(refused)
    )


def _moved_starts(events: list[Component], how: Reading) -> dict[str, set[int]]:
    """Starts of single occurrences that another event of the same UID replaces (RECURRENCE-ID, section 3.8.4.4)."""
    moved: dict[str, set[int]] = {}
    for event in events:
        instead_of, uid = event.first("RECURRENCE-ID"), event.first("UID")
        if instead_of is None or uid is None:
            continue
        try:
            moved.setdefault(uid.value, set()).add(wall_time(instead_of, how.timezone).ns)
        except CalendarError:
            continue  # told when the event itself is read
    return moved


def _changes(event: Component, how: Reading, moved: dict[str, set[int]]) -> list[KnownChange]:
    status, begins, uid = event.first("STATUS"), event.first("DTSTART"), event.first("UID")
    if status is not None and status.value.strip().upper() == "CANCELLED":
        return []
    if begins is None:
        raise CalendarError(f"line {event.line}: the event has no DTSTART")
    start = wall_time(begins, how.timezone)
    left_out = _left_out(event, how)
    instead_of = event.first("RECURRENCE-ID")
    if instead_of is not None:
        if "RANGE" in instead_of.parameters:
            raise CalendarError(f"line {instead_of.line}: a change of all following occurrences is not understood")
        wall_time(instead_of, how.timezone)
    else:
        left_out |= moved.get(uid.value, set()) if uid is not None else set()
    if event.first("RDATE") is not None:
        raise CalendarError(f"line {event.line}: RDATE is not understood. Write its dates as single events")
    rule = event.first("RRULE")
    span = _length(event, start, how)
    return [
        KnownChange(
            start=one.ns, end=_end(one, span), streams=how.streams, reason=_reason(event), effect=_effect(event, how)
        )
        for one in occurrences(start, repetition(rule, start) if rule is not None else None, how.end)
        if one.ns not in left_out and one.ns < how.end and _end(one, span) > how.start
    ]


def _left_out(event: Component, how: Reading) -> set[int]:
    return {
        wall_time(prop, how.timezone, value).ns for prop in event.every("EXDATE") for value in prop.value.split(",")
    }


def _length(event: Component, start: WallTime, how: Reading) -> Span:
    """How long each occurrence lasts; a date without an end is its day (section 3.6.1)."""
    ends, lasts = event.first("DTEND"), event.first("DURATION")
    if lasts is not None:
        return duration(lasts)
    if ends is None:
        if not start.whole_day:
            raise CalendarError(f"line {event.line}: the event has no end (DTEND or DURATION)")
        return Span(1, 0)
    end = wall_time(ends, how.timezone)
    if end.ns <= start.ns:
        raise CalendarError(f"line {ends.line}: DTEND is not after DTSTART")
    if start.whole_day and end.whole_day:
        return Span((end.wall - start.wall).days, 0)
    return Span(0, (end.ns - start.ns) // SECOND)


def _end(start: WallTime, span: Span) -> int:
    """Days go by the wall clock, seconds are exact."""
    return start.at(start.wall + timedelta(days=span.days)).ns + span.seconds * SECOND


def _reason(event: Component) -> str:
    summary = event.first("SUMMARY")
    return " ".join(plain_text(summary.value).split()) if summary is not None and summary.value.strip() else "unnamed"


def _effect(event: Component, how: Reading) -> Effect:
    told = [text.lower() for prop in event.every("CATEGORIES") for text in text_list(prop.value)]
    return next((effect for effect in EFFECTS if effect in told), how.effect)
