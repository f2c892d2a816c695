"""Stamps of one length at once: digits picked out of a byte matrix column by column.

The common forms only (YYYY-MM-DDTHH:MM:SS with fraction and offset, and the web-server log's); whatever does
not fit is left to the one-by-one reader of monitor.parse.stamps, which knows all forms.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

NS = 1_000_000_000
_BEFORE_MONTH = np.array([0, 31, 59, 90, 120, 151, 181, 212, 243, 273, 304, 334])
_IN_MONTH = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
_MONTH_NAMES = np.frombuffer(b"JanFebMarAprMayJunJulAugSepOctNovDec", np.uint8).reshape(12, 3).astype(np.int64)
_MONTH_KEYS = (_MONTH_NAMES[:, 0] << 16) | (_MONTH_NAMES[:, 1] << 8) | _MONTH_NAMES[:, 2]
_MOST_LAYOUTS = 4


@dataclass(frozen=True, slots=True)
class Found:
    """Row by row: seconds (local where `local`, else UTC), nanoseconds after them, and what was read."""

    seconds: NDArray[np.int64]
    fraction: NDArray[np.int64]
    local: NDArray[np.bool_]
    read: NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class _Layout:
    """Where the parts of a stamp stand: columns of the date's and the clock's digits and of the marks."""

    year: int
    month: int
    day: int
    named_month: bool
    hour: int
    marks: tuple[tuple[int, bytes], ...]
    fraction: tuple[int, int]
    offset: tuple[int, int, int] | None  # columns of the sign, the hours, the minutes
    local: bool


def days_since_1970(year: int, month: int, day: int) -> int:
    """Days from 1970-01-01 to a date of the Gregorian calendar."""
    return int(_days(np.array([year]), np.array([month]), np.array([day]))[0])


def read_matrix(matrix: NDArray[np.uint8]) -> Found:
    """Read stamps of one length, uint8 (n, length)."""
    n = matrix.shape[0]
    seconds, fraction = np.zeros(n, np.int64), np.zeros(n, np.int64)
    local, read = np.zeros(n, bool), np.zeros(n, bool)
    rows = np.arange(n)
    for _ in range(_MOST_LAYOUTS):
        if not rows.size:
            break
        layout = _layout_of(matrix[rows[0]].tobytes())
        if layout is None:
            rows = rows[1:]
            continue
        part = _read(matrix if rows.size == n else matrix[rows], layout)
        fit = part.read
        done = rows[fit]
        seconds[done], fraction[done] = part.seconds[fit], part.fraction[fit]
        local[done], read[done] = layout.local, True
        rows = rows[~fit]
        if rows.size and not fit.any():
            rows = rows[1:]
    return Found(seconds, fraction, local, read)


def _layout_of(row: bytes) -> _Layout | None:
    if row[:1] == b"[" and row[-1:] == b"]":
        return _log_layout(row, 1, ((0, b"["), (len(row) - 1, b"]")))
    if row[2:3] == b"/":
        return _log_layout(row, 0, ())
    if len(row) < 19:
        return None
    marks: list[tuple[int, bytes]] = [(4, b"-"), (7, b"-"), (10, b"Tt "), (13, b":"), (16, b":")]
    at = 19
    fraction = (at, at)
    if row[at : at + 1] in (b".", b","):
        marks.append((at, b".,"))
        end = at + 1
        while row[end : end + 1].isdigit():
            end += 1
        fraction, at = (at + 1, end), end
        if end == fraction[0]:
            return None
    return _with_offset(row, at, _Layout(0, 5, 8, False, 11, tuple(marks), fraction, None, True))


def _log_layout(row: bytes, at: int, marks: tuple[tuple[int, bytes], ...]) -> _Layout | None:
    """dd/Mon/yyyy:HH:MM:SS and a numeric offset."""
    inner = ((at + 2, b"/"), (at + 6, b"/"), (at + 11, b":"), (at + 14, b":"), (at + 17, b":"))
    base = _Layout(at + 7, at + 3, at, True, at + 12, marks + inner, (0, 0), None, True)
    end = len(row) - 1 if at else len(row)
    return _with_offset(row[:end], at + 20, base)


def _with_offset(row: bytes, at: int, base: _Layout) -> _Layout | None:
    """Complete a layout with what stands from column `at` on: nothing, Z, or a numeric offset."""
    marks, offset, local = list(base.marks), None, True
    if len(row) > at and row[at : at + 1] == b" ":
        marks.append((at, b" "))
        at += 1
    elif base.named_month and len(row) > at:
        return None
    rest = row[at:]
    if rest in (b"Z", b"z") and not base.named_month:
        marks.append((at, b"Zz"))
        local = False
    elif len(rest) in (5, 6) and rest[:1] in (b"+", b"-"):
        if len(rest) == 6:
            marks.append((at + 3, b":"))
        marks.append((at, b"+-"))
        offset, local = (at, at + 1, at + len(rest) - 2), False
    elif rest or marks[-1:] == [(at - 1, b" ")]:
        return None
    return _Layout(
        base.year, base.month, base.day, base.named_month, base.hour, tuple(marks), base.fraction, offset, local
    )


def _read(m: NDArray[np.uint8], layout: _Layout) -> Found:
    good = np.ones(m.shape[0], bool)
    for column, allowed in layout.marks:
        mark = m[:, column] == allowed[0]
        for other in allowed[1:]:
            mark |= m[:, column] == other
        good &= mark
    year = _digits(m, layout.year, 4, good)
    month = _month(m, layout.month, good) if layout.named_month else _digits(m, layout.month, 2, good)
    day, hour = _digits(m, layout.day, 2, good), _digits(m, layout.hour, 2, good)
    minute, second = _digits(m, layout.hour + 3, 2, good), _digits(m, layout.hour + 6, 2, good)
    good &= (month >= 1) & (month <= 12) & (year >= 1969) & (year <= 2201)
    month = np.where(good, month, 1)
    leap = (year % 4 == 0) & ((year % 100 != 0) | (year % 400 == 0))
    good &= (day >= 1) & (day <= _IN_MONTH[month - 1] + (leap & (month == 2)))
    good &= (hour <= 23) & (minute <= 59) & (second <= 59)  # a second 60 is left to the one-by-one reader
    seconds = _days(year, month, day) * 86400 + hour * 3600 + minute * 60 + second
    if layout.offset:
        sign, hours, minutes = layout.offset
        ahead_h, ahead_m = _digits(m, hours, 2, good), _digits(m, minutes, 2, good)
        good &= (ahead_h <= 23) & (ahead_m <= 59)
        seconds = seconds - (ahead_h * 3600 + ahead_m * 60) * np.where(m[:, sign] == ord("+"), 1, -1)
    return Found(seconds, _fraction(m, layout.fraction, good), np.full(good.size, layout.local), good)


def _fraction(m: NDArray[np.uint8], columns: tuple[int, int], good: NDArray[np.bool_]) -> NDArray[np.int64]:
    first, last = columns
    if first == last:
        return np.zeros(m.shape[0], np.int64)
    used = min(last - first, 9)
    for column in range(first + used, last):
        good &= (m[:, column] - np.uint8(48)) <= 9
    return np.asarray(_digits(m, first, used, good) * 10 ** (9 - used), np.int64)


def _digits(m: NDArray[np.uint8], start: int, count: int, good: NDArray[np.bool_]) -> NDArray[np.int64]:
    """The number in `count` columns; rows with anything but digits become not good."""
    value = np.zeros(m.shape[0], np.int64)
    for column in range(start, start + count):
        digit = m[:, column] - np.uint8(48)  # anything below '0' wraps to a large number
        good &= digit <= 9
        value = np.asarray(value * 10 + digit, np.int64)
    return value


def _month(m: NDArray[np.uint8], start: int, good: NDArray[np.bool_]) -> NDArray[np.int64]:
    wide = m[:, start : start + 3].astype(np.int64)
    key = (wide[:, 0] << 16) | (wide[:, 1] << 8) | wide[:, 2]
    hit = key[:, None] == _MONTH_KEYS[None, :]
    good &= hit.any(axis=1)
    return np.asarray(hit.argmax(axis=1) + 1, np.int64)


def _days(year: NDArray[np.int64], month: NDArray[np.int64], day: NDArray[np.int64]) -> NDArray[np.int64]:
    """Days since 1970-01-01: whole years, their leap days (Gregorian rule), whole months, days."""
    before = year - 1
    leaps = before // 4 - before // 100 + before // 400 - 477  # 477 leap days up to the end of 1969
    leap = (year % 4 == 0) & ((year % 100 != 0) | (year % 400 == 0))
    in_year = _BEFORE_MONTH[month - 1] + (leap & (month > 2)) + day - 1
    return np.asarray((year - 1970) * 365 + leaps + in_year, np.int64)
