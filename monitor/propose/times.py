"""Which field is the event's time, what its stamps look like, and how far lines are out of order."""

from __future__ import annotations

import re

import numpy as np
from numpy.typing import NDArray

from monitor.parse.stamps import NO_STAMP, UNITS, StampReader
from monitor.propose.columns import Column, Table
from monitor.propose.records import TimeFound
from monitor.propose.vocabulary import END_TIME, EVENT_TIME, OTHER_TIME

_ZONED = re.compile(r"(?:[Zz]|[+-]\d\d:?\d\d)\]?$")
_ISO = re.compile(r"\d{4}-\d\d-\d\d")
_LOG = re.compile(r"\[?\d\d/[A-Z][a-z][a-z]/\d{4}:")
_EPOCH = re.compile(r"\d{9,19}(?:\.\d+)?")
_YEAR_1990, _YEAR_2100 = 631_152_000, 4_102_444_800
_UNIT_NAMES = {"s": "seconds", "ms": "milliseconds", "us": "microseconds", "ns": "nanoseconds"}
MINUTE = 60_000_000_000


def find_times(table: Table) -> tuple[TimeFound, ...]:
    """Fields that hold times, the likeliest event time first."""
    found = [f for column in table.columns if (f := _time(column, table)) is not None]
    return tuple(sorted(found, key=lambda f: -f.score))


def stamps_of(column: Column, unit: str) -> NDArray[np.int64]:
    """Stamps of all rows, int64 ns, NO_STAMP where there is none; local ones are read as UTC."""
    reader = StampReader("UTC", unit)
    return np.fromiter((NO_STAMP if t is None else reader.text(t) for t in column.texts), np.int64, len(column.texts))


def as_floats(stamps: NDArray[np.int64]) -> NDArray[np.float64]:
    """Stamps as float64, NaN where there is none."""
    return np.where(stamps == NO_STAMP, np.nan, stamps.astype(np.float64))


def disorder_of(stamps: NDArray[np.int64], pieces: NDArray[np.int64]) -> tuple[int, float]:
    """(see TimeFound.disorder; share of lines behind their predecessor), piece by piece."""
    behind: list[NDArray[np.int64]] = []
    back = steps = 0
    for piece in np.unique(pieces):
        own = stamps[(pieces == piece) & (stamps != NO_STAMP)]
        if own.size > 1:
            behind.append(np.maximum.accumulate(own) - own)
            back += int((np.diff(own) < 0).sum())
            steps += own.size - 1
    if not steps:
        return 0, 0.0
    return int(np.quantile(np.concatenate(behind), 0.999)), back / steps


def _time(column: Column, table: Table) -> TimeFound | None:
    if column.field is None or column.present < 0.5 * table.rows:
        return None
    texts = [t for t in column.texts if t is not None]
    probe = texts[:: max(1, len(texts) // 300)]
    kind, zoned, unit = _kind(probe)
    if not kind:
        return None
    stamps = stamps_of(column, unit)
    readable = float((stamps != NO_STAMP).mean())
    if readable < 0.5:
        return None
    disorder, back = disorder_of(stamps, table.pieces)
    distinct = len(column.counts)
    score = 2.0 * readable + 1.0 - back - min(1.0, disorder / (24 * 60 * MINUTE))
    score += 1.0 * bool(column.words & EVENT_TIME) - 2.0 * bool(column.words & OTHER_TIME)
    score += 0.5 * bool(column.words & END_TIME) - 1.5 * (kind == "dates without a time of day")
    score -= 2.0 * (distinct == 1 and len(texts) > 20)
    return TimeFound(
        field=column.field, kind=kind, zoned=zoned, unit=unit, readable=readable, disorder=disorder,
        score=round(score, 3),
    )  # fmt: skip


def _kind(texts: list[str]) -> tuple[str, bool, str]:
    """Words for what the stamps are, whether they say their zone, unit of numbers; ("", ...) for no stamps."""
    if not texts:
        return "", False, "auto"
    reader = StampReader()
    most = 0.9 * len(texts)
    if sum(bool(_EPOCH.fullmatch(t)) for t in texts) >= most:
        for unit, ns in UNITS.items():
            factor = 1_000_000_000 // ns
            values = [float(t) for t in texts if _EPOCH.fullmatch(t)]
            if all(_YEAR_1990 * factor <= v <= _YEAR_2100 * factor for v in values):
                return f"{_UNIT_NAMES[unit]} since 1970", True, unit
        return "", False, "auto"
    good = [t for t in texts if reader.text(t) != NO_STAMP]
    if len(good) < most:
        return "", False, "auto"
    zoned = sum(bool(_ZONED.search(t)) for t in good if len(t) > 10)
    if all(len(t) == 10 and _ISO.match(t) for t in good):
        return "dates without a time of day", False, "auto"
    form = "stamps of web-server logs" if _LOG.match(good[0]) else "RFC 3339 stamps" if _ISO.match(good[0]) else ""
    if not form:
        return "", False, "auto"
    if zoned == len(good):
        return f"{form} with their offset from UTC", True, "auto"
    if zoned:
        return f"{form}, some with and some without an offset", False, "auto"
    return (
        f"{'local stamps such as ' + good[0][:32] if form.startswith('RFC') else form} without an offset",
        False,
        "auto",
    )
