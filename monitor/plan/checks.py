"""Checks of single settings. Each raises SettingsError with the file, the path of the key and what was expected."""

from __future__ import annotations

import re
from collections.abc import Sequence
from datetime import UTC, date, datetime
from difflib import get_close_matches
from types import UnionType
from typing import Any, Union, get_args, get_origin, get_type_hints
from zoneinfo import ZoneInfo, ZoneInfoNotFoundError

import msgspec

from monitor.errors import SettingsError
from monitor.plan.records import Passages
from monitor.plan.spans import parse_span, span_text


def no_unknown_keys(name: str, raw: Any, table: Any, path: str = "") -> None:
    """Refuse a key that `table` (a Struct, a dict or list of them) does not know, naming the nearest known one."""
    if get_origin(table) in (UnionType, Union):
        table = next(
            (part for part in get_args(table) if isinstance(part, type) and issubclass(part, msgspec.Struct)), None
        )
    if get_origin(table) is dict and isinstance(raw, dict):
        for key, value in raw.items():
            no_unknown_keys(name, value, get_args(table)[1], f"{path}{quoted(key)}.")
    elif get_origin(table) is list and isinstance(raw, list):
        for index, value in enumerate(raw):
            no_unknown_keys(name, value, get_args(table)[0], f"{path.rstrip('.')}[{index}].")
    elif isinstance(table, type) and issubclass(table, msgspec.Struct) and isinstance(raw, dict):
        hints = get_type_hints(table)
        fields = {f.encode_name: hints[f.name] for f in msgspec.structs.fields(table)}
        for key, value in raw.items():
            if key not in fields:
                hint = nearest(key, sorted(fields), "Known keys here")
                raise SettingsError(f"{name}: {path}{quoted(key)}: unknown key. {hint}")
            no_unknown_keys(name, value, fields[key], f"{path}{key}.")


def nearest(key: str, known: Sequence[str], of: str = "Known are") -> str:
    """'Did you mean "size"?', or, when nothing is near, all that is known."""
    near = get_close_matches(key, known, n=1, cutoff=0.5)
    return f'Did you mean "{near[0]}"?' if near else f"{of}: {', '.join(known)}."


def quoted(key: str) -> str:
    """A key as TOML would write it."""
    return key if re.fullmatch(r"[A-Za-z0-9_-]+", key) and not re.search(r"[*?\[]", key) else f'"{key}"'


def in_range(
    name: str, path: str, value: float, *, low: float, high: float = float("inf"), open_low: bool = False
) -> None:
    """Refuse a number outside low..high."""
    fine = (value > low if open_low else value >= low) and value <= high and value != float("inf")
    if not fine:
        least = f"more than {low:g}" if open_low else f"at least {low:g}"
        most = f" and at most {high:g}" if high != float("inf") else ""
        raise SettingsError(f"{name}: {path}: {value!r} is out of range; expected {least}{most}.")


def span(name: str, path: str, text: str, *, low: int) -> int:
    """A span of time in ns, at least `low` ns."""
    ns = parse_span(text)
    if ns is None:
        raise SettingsError(
            f'{name}: {path}: "{text}" is not a span of time; expected such as "90s", "2m", "1h", "14d".'
        )
    if ns < low:
        raise SettingsError(f'{name}: {path}: "{text}" is too short; expected at least {span_text(low)}.')
    return ns


def passages(name: str, path: str, text: str) -> Passages:
    """'1 per 30d' as a record."""
    match = re.fullmatch(r"\s*([0-9]+(?:\.[0-9]+)?)\s+per\s+(\S+)\s*", text)
    period = parse_span(match[2]) if match else None
    if match is None or not period or float(match[1]) <= 0:
        raise SettingsError(f'{name}: {path}: "{text}" is not understood; expected such as "1 per 30d".')
    return Passages(times=float(match[1]), period=period)


def timezone_of(name: str, path: str, zone: str) -> str:
    """A time zone by its IANA name."""
    try:
        ZoneInfo(zone)
    except (ZoneInfoNotFoundError, ValueError, OSError):
        raise SettingsError(
            f'{name}: {path}: "{zone}" is no known time zone; expected such as "Europe/Lisbon".'
        ) from None
    return zone


def time_of(name: str, path: str, value: datetime | date | str, zone: str) -> int:
    """A moment in ns: an RFC 3339 time, or a date (its first moment in `zone`)."""
    if isinstance(value, str):
        try:
            value = datetime.fromisoformat(value)
        except ValueError:
            raise SettingsError(f'{name}: {path}: "{value}" is no time; expected such as 2026-11-27.') from None
    if not isinstance(value, datetime):
        value = datetime(value.year, value.month, value.day, tzinfo=ZoneInfo(zone))
    if value.tzinfo is None:
        value = value.replace(tzinfo=ZoneInfo(zone))
    whole = value.astimezone(UTC) - datetime(1970, 1, 1, tzinfo=UTC)
    return (whole.days * 86_400 + whole.seconds) * 1_000_000_000 + whole.microseconds * 1000
