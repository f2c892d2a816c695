"""Times, durations and simple repetitions of iCalendar (RFC 5545).

Repetitions follow the wall clock of the event's own zone: a meeting at nine stays at nine when the clocks change. A
wall-clock time that does not exist is read with the distance to UTC before the gap, one that exists twice is its first
occurrence (RFC 5545 section 3.3.5), which is what fold = 0 means in the standard library (PEP 495).
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

import msgspec

from monitor.alarms.calendar_text import CalendarError, Property

SECOND = 1_000_000_000
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
WEEKDAYS = ("MO", "TU", "WE", "TH", "FR", "SA", "SU")


class WallTime(msgspec.Struct, frozen=True):
    """A wall-clock time in a zone; `whole_day` for a DATE."""

    wall: datetime
    zone: str
    whole_day: bool

    @property
    def ns(self) -> int:
        """The moment, ns since 1970 UTC."""
        since = self.wall.replace(tzinfo=ZoneInfo(self.zone)).astimezone(UTC) - _EPOCH
        return (since.days * 86_400 + since.seconds) * SECOND

    def at(self, wall: datetime) -> WallTime:
        """Another wall-clock time of the same kind."""
        return WallTime(wall, self.zone, self.whole_day)


def wall_time(prop: Property, default_zone: str, value: str | None = None) -> WallTime:
    """A DATE or DATE-TIME: in UTC (Z), in its TZID, or, without either, in the default zone. Raises CalendarError."""
    text = (prop.value if value is None else value).strip()
    found = re.fullmatch(r"(\d{4})(\d\d)(\d\d)(?:T(\d\d)(\d\d)(\d\d)(Z)?)?", text, flags=re.ASCII)
    if found is None:
        raise CalendarError(
            f'line {prop.line}: {prop.name} "{text}" is neither a date (20261127) nor a time (20261127T090000Z)'
        )
    zone = "UTC" if found[7] else prop.parameters.get("TZID", default_zone)
    hour, minute, second = (int(part or 0) for part in found.groups()[3:6])
    try:
        # Second 60 is a positive leap second, which RFC 5545 lets stand for second 59.
        wall = datetime(int(found[1]), int(found[2]), int(found[3]), hour, minute, min(second, 59))  # noqa: DTZ001
    except ValueError as error:
        raise CalendarError(f'line {prop.line}: {prop.name} "{text}" is no real time ({error})') from None
    if not 1970 <= wall.year < 2200:
        raise CalendarError(f'line {prop.line}: {prop.name} "{text}" lies outside the years 1970 to 2199')
    try:
        ZoneInfo(zone)
    except (ZoneInfoNotFoundError, ValueError, OSError):
        raise CalendarError(
            f'line {prop.line}: {prop.name} is in the time zone "{zone}", which is no IANA name such as "Europe/Lisbon"'
        ) from None
    return WallTime(wall, zone, found[4] is None)


class Span(msgspec.Struct, frozen=True):
    """A DURATION: whole days of the wall clock, and exact seconds (RFC 5545 section 3.3.6)."""

    days: int
    seconds: int


def duration(prop: Property) -> Span:
    """The value of a DURATION property, which must be longer than nothing. Raises CalendarError."""
    text = prop.value.strip()
    found = re.fullmatch(r"\+?P(?:(\d+)W|(?:(\d+)D)?(?:T(?:(\d+)H)?(?:(\d+)M)?(?:(\d+)S)?)?)", text, flags=re.ASCII)
    if found is None or len(text) > 30:
        raise CalendarError(f'line {prop.line}: DURATION "{text}" is not such as P1D or PT2H30M')
    weeks, days, hours, minutes, seconds = (int(part or 0) for part in found.groups())
    span = Span(7 * weeks + days, 3600 * hours + 60 * minutes + seconds)
    if span.days + span.seconds == 0 or span.days > 36_600:
        raise CalendarError(f'line {prop.line}: DURATION "{text}" is nothing, or more than a hundred years')
    return span


class Repetition(msgspec.Struct, frozen=True, kw_only=True):
    """A repetition that is understood: daily or weekly, every `interval`-th, on some weekdays, with its end."""

    weekly: bool
    interval: int
    count: int | None
    until: int | None
    weekdays: tuple[int, ...]
    week_starts: int


def repetition(prop: Property, start: WallTime) -> Repetition:
    """The value of an RRULE. Raises CalendarError for whatever is beyond daily and weekly repetitions."""
    parts = dict(part.partition("=")[::2] for part in prop.value.upper().strip().split(";") if part)
    unknown = sorted(set(parts) - {"FREQ", "INTERVAL", "COUNT", "UNTIL", "BYDAY", "WKST"})
    weekly = parts.get("FREQ") == "WEEKLY"
    if unknown or parts.get("FREQ") not in ("DAILY", "WEEKLY") or ("BYDAY" in parts and not weekly):
        raise CalendarError(
            f'line {prop.line}: the repetition "{prop.value}" is not understood; only FREQ=DAILY and FREQ=WEEKLY with '
            "INTERVAL, COUNT or UNTIL, weekly also with BYDAY, are. Write its dates as single events"
        )
    until = None
    if "UNTIL" in parts:
        # A date as the end means the whole day; its zone is the event's (section 3.3.10).
        end = wall_time(msgspec.structs.replace(prop, parameters={"TZID": start.zone}), start.zone, parts["UNTIL"])
        until = end.at(end.wall + timedelta(days=1)).ns - 1 if end.whole_day else end.ns
    days = parts.get("BYDAY", WEEKDAYS[start.wall.weekday()]).split(",")
    if any(day not in WEEKDAYS for day in [*days, parts.get("WKST", "MO")]):
        raise CalendarError(f'line {prop.line}: the weekdays of "{prop.value}" are not such as BYDAY=MO,FR')
    return Repetition(
        weekly=weekly,
        interval=_whole(prop, parts, "INTERVAL") or 1,
        count=_whole(prop, parts, "COUNT"),
        until=until,
        weekdays=tuple(sorted({WEEKDAYS.index(day) for day in days})),
        week_starts=WEEKDAYS.index(parts.get("WKST", "MO")),
    )


def _whole(prop: Property, parts: dict[str, str], key: str) -> int | None:
    if key not in parts:
        return None
    if not re.fullmatch(r"[1-9]\d{0,4}", parts[key], flags=re.ASCII):
        raise CalendarError(
            f"line {prop.line}: {key}={parts[key]} of the repetition is no whole number from 1 to 99999"
        )
    return int(parts[key])


def occurrences(start: WallTime, rule: Repetition | None, before: int) -> Iterator[WallTime]:
    """The starts of an event, in order, up to the rule's end and not at or after `before` (ns).

    The first one is the event's own start and counts, whether the rule gives it or not (section 3.8.5.3).
    """
    yield start
    if rule is None:
        return
    for place, wall in enumerate(_walls(start.wall, rule), start=1):
        found = start.at(wall)
        if wall.year >= 2200 or found.ns >= before or (rule.until is not None and found.ns > rule.until):
            return
        if place == rule.count:
            return
        yield found


def _walls(start: datetime, rule: Repetition) -> Iterator[datetime]:
    """Wall-clock starts after the first, without end."""
    if not rule.weekly:
        wall = start
        while True:
            wall += timedelta(days=rule.interval)
            yield wall
    week = start - timedelta(days=(start.weekday() - rule.week_starts) % 7)
    in_week = sorted((day - rule.week_starts) % 7 for day in rule.weekdays)
    while True:
        for place in in_week:
            wall = week + timedelta(days=place)
            if wall > start:
                yield wall
        week += timedelta(days=7 * rule.interval)
