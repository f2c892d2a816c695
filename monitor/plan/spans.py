"""Spans of time as people write them: "2m", "1h", "14d"."""

from __future__ import annotations

import re

SECOND = 1_000_000_000
UNITS = {"ms": SECOND // 1000, "s": SECOND, "m": 60 * SECOND, "h": 3600 * SECOND, "d": 86_400 * SECOND,
         "w": 7 * 86_400 * SECOND}  # fmt: skip
DAY = UNITS["d"]

_SPAN = re.compile(r"([0-9]{1,9})\s*(ms|s|m|h|d|w)")


def parse_span(text: str) -> int | None:
    """Nanoseconds of a span such as '90s', '2m', '1h', '14d', '2w'; None when it is not one."""
    match = _SPAN.fullmatch(text.strip())
    return int(match[1]) * UNITS[match[2]] if match else None


def span_text(ns: int) -> str:
    """The shortest exact text of a span."""
    for unit in ("w", "d", "h", "m", "s", "ms"):
        if ns % UNITS[unit] == 0 and (unit != "w" or ns >= 4 * UNITS["w"]):
            return f"{ns // UNITS[unit]}{unit}"
    return f"{ns}ns"
