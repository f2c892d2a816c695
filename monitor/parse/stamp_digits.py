"""Stamps of one length at once: digits picked out of a byte matrix column by column.

The common forms only (YYYY-MM-DDTHH:MM:SS with fraction and offset, and the web-server log's); whatever does
not fit is left to the one-by-one reader of monitor.parse.stamps, which knows all forms.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

NS = 1_000_000_000
_BEFORE = (0, 31, 59, 90, 120, 151, 181, 212, 243, 273, 304, 334)
_LEAPS_BEFORE = 477  # leap days up to the end of 1969
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
    before = year - 1
    leaps = before // 4 - before // 100 + before // 400 - _LEAPS_BEFORE
    leap = year % 4 == 0 and (year % 100 != 0 or year % 400 == 0)
    return (year - 1970) * 365 + leaps + _BEFORE[month - 1] + (leap and month > 2) + day - 1


def days_in(year: int, month: int) -> int:
    """Days of a month of the Gregorian calendar."""
    leap = year % 4 == 0 and (year % 100 != 0 or year % 400 == 0)
    return 29 if month == 2 and leap else (31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31)[month - 1]


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


def _read(matrix: NDArray[np.uint8], layout: _Layout) -> Found:
    columns = np.ascontiguousarray(matrix.T)  # whole columns are worked on
    good = np.ones(matrix.shape[0], bool)
    for column, allowed in layout.marks:
        mark = columns[column] == allowed[0]
        for other in allowed[1:]:
            mark |= columns[column] == other
        good &= mark
    digits = columns - np.uint8(48)  # anything below '0' wraps to a large number
    y, m, d, h = layout.year, layout.month, layout.day, layout.hour
    pairs = [y, y + 2, d, h, h + 3, h + 6] + ([] if layout.named_month else [m])
    good &= (digits[pairs] <= 9).all(axis=0) & (digits[[p + 1 for p in pairs]] <= 9).all(axis=0)
    year = _pair(digits, y).astype(np.int64) * 100 + _pair(digits, y + 2)
    month = _month(columns, m, good) if layout.named_month else _pair(digits, m)
    hour, minute, second = _pair(digits, h), _pair(digits, h + 3), _pair(digits, h + 6)
    good &= (month >= 1) & (month <= 12) & (year >= 1969) & (year <= 2201)
    days = _days(year, month, _pair(digits, d), good)
    good &= (hour <= 23) & (minute <= 59) & (second <= 59)  # a second 60 is left to the one-by-one reader
    seconds = days * 86400 + (hour.astype(np.int64) * 3600 + minute.astype(np.int64) * 60 + second)
    if layout.offset:
        sign, hours, minutes = layout.offset
        good &= (digits[[hours, hours + 1, minutes, minutes + 1]] <= 9).all(axis=0)
        ahead_h, ahead_m = _pair(digits, hours), _pair(digits, minutes)
        good &= (ahead_h <= 23) & (ahead_m <= 59)
        ahead = ahead_h.astype(np.int64) * 3600 + ahead_m.astype(np.int64) * 60
        seconds = seconds - np.where(columns[sign] == ord("+"), ahead, -ahead)
    return Found(seconds, _fraction(digits, layout.fraction, good), np.full(good.size, layout.local), good)


def _pair(digits: NDArray[np.uint8], column: int) -> NDArray[np.uint8]:
    """Two columns as a number; what it is for rows that hold no digits does not matter."""
    return np.asarray(digits[column] * np.uint8(10) + digits[column + 1], np.uint8)


def _fraction(digits: NDArray[np.uint8], columns: tuple[int, int], good: NDArray[np.bool_]) -> NDArray[np.int64]:
    first, last = columns
    if first == last:
        return np.zeros(digits.shape[1], np.int64)
    good &= (digits[first:last] <= 9).all(axis=0)
    used = min(last - first, 9)
    value = np.zeros(digits.shape[1], np.int64)
    for column in range(first, first + used):
        value = value * 10 + digits[column]
    return np.asarray(value * 10 ** (9 - used), np.int64)


def _distinct(keys: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Distinct keys and, for each row, the place of its key among them."""
    if keys.size and keys.min() == keys.max():  # by far the most usual
        return keys[:1], np.zeros(keys.size, np.int64)
    distinct, where = np.unique(keys, return_inverse=True)
    return distinct, where.reshape(-1)


def _month(columns: NDArray[np.uint8], start: int, good: NDArray[np.bool_]) -> NDArray[np.uint8]:
    wide = columns[start : start + 3].astype(np.int64)
    key = (wide[0] << 16) | (wide[1] << 8) | wide[2]
    keys, where = _distinct(key)  # few months in a block
    hit = keys[:, None] == _MONTH_KEYS[None, :]
    good &= hit.any(axis=1)[where]
    return np.asarray((hit.argmax(axis=1) + 1)[where], np.uint8)


def _days(
    year: NDArray[np.int64], month: NDArray[np.uint8], day: NDArray[np.uint8], good: NDArray[np.bool_]
) -> NDArray[np.int64]:
    """Days since 1970-01-01; rows whose day is not in the calendar become not good."""
    date = np.where(good, (year << 16) | (month.astype(np.int64) << 8) | day, (1970 << 16) | (1 << 8) | 1)
    dates, where = _distinct(date)  # few days in a block
    days = np.zeros(dates.size, np.int64)
    there = np.ones(dates.size, bool)
    for i, packed in enumerate(dates.tolist()):
        y, m, d = packed >> 16, packed >> 8 & 255, packed & 255
        there[i] = 1 <= d <= days_in(y, m)
        days[i] = days_since_1970(y, m, d)
    good &= there[where]
    return np.asarray(days[where], np.int64)
