"""Times and spans as people read them: local time with its zone, ages in one or two units."""

from __future__ import annotations

from datetime import UTC, date, datetime, timedelta
from zoneinfo import ZoneInfo

from monitor.plan.spans import SECOND

MONTHS = ("Jan", "Feb", "Mar", "Apr", "May", "Jun", "Jul", "Aug", "Sep", "Oct", "Nov", "Dec")
_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)
_LAST = 253_402_300_799 * SECOND  # the end of year 9999, the last that a calendar date can name


def local(ns: int, zone: str) -> datetime:
    """The moment as local time; beyond the calendar the nearest date that it can name."""
    ns = max(-62_000_000_000 * SECOND, min(ns, _LAST - 86_400 * SECOND))
    return (_EPOCH + timedelta(microseconds=ns // 1000)).astimezone(ZoneInfo(zone))


def zone_name(moment: datetime) -> str:
    """The zone as its usual letters, or as its distance to UTC where it has none."""
    name = moment.tzname() or "UTC"
    return f"UTC{name}" if name[:1] in "+-" else name


def moment_text(ns: int, zone: str, *, seconds: bool = False) -> str:
    """'1 Dec 2026 14:05 WET'."""
    when = local(ns, zone)
    clock = f"{when:%H:%M:%S}" if seconds else f"{when:%H:%M}"
    return f"{day_text(when)} {clock} {zone_name(when)}"


def short_moment(ns: int, zone: str, now: int) -> str:
    """The same, leaving out the date of today and the year of this year: '14:05 WET', '30 Nov 14:05 WET'."""
    when, today = local(ns, zone), local(now, zone)
    clock = f"{when:%H:%M} {zone_name(when)}"
    if when.date() == today.date():
        return clock
    return f"{day_text(when) if when.year != today.year else f'{when.day} {MONTHS[when.month - 1]}'} {clock}"


def day_text(when: date) -> str:
    """'1 Dec 2026'."""
    return f"{when.day} {MONTHS[when.month - 1]} {when.year}"


def table_time(ns: int, zone: str, *, named: bool = False) -> str:
    """'2026-12-01 14:05' in local time; the zone stands in the heading, or with `named` behind it."""
    when = local(ns, zone)
    return f"{when:%Y-%m-%d %H:%M}" + (f" {zone_name(when)}" if named else "")


def utc_text(ns: int) -> str:
    """RFC 3339 UTC with as many decimals as the moment needs: '2026-12-01T14:05:00Z'."""
    when = _EPOCH + timedelta(seconds=ns // SECOND)
    fraction = f"{ns % SECOND:09d}".rstrip("0")
    return f"{when:%Y-%m-%dT%H:%M:%S}" + (f".{fraction}Z" if fraction else "Z")


_STEPS = (("d", 86_400), ("h", 3600), ("min", 60), ("s", 1))


def span_short(ns: int) -> str:
    """A span in its largest unit: '12 s', '3 min', '5 h', '8 d'."""
    seconds = max(0, ns) // SECOND
    for unit, length in _STEPS:
        if seconds >= length:
            return f"{seconds // length} {unit}"
    return "0 s"


def span_words(ns: int) -> str:
    """A span in words, one unit: '1 minute', '3 hours', '8 days'."""
    seconds = max(0, ns) // SECOND
    for unit, length in (("day", 86_400), ("hour", 3600), ("minute", 60)):
        if seconds >= length:
            return plural(seconds // length, unit)
    return plural(seconds, "second")


def plural(count: int, noun: str, many: str | None = None) -> str:
    """'1 event', '2 events'; thousands set apart."""
    return f"{count:,} {noun if count == 1 else many or noun + 's'}".replace(",", " ")
