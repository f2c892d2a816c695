"""Time stamps of lines to integer nanoseconds since 1970-01-01T00:00:00 UTC.

Read are
  RFC 3339 and its usual relatives: 2026-12-01T14:05:36.123456789+01:00, a space instead of the T (also
      before the offset), a comma instead of the point, +0100, no seconds, no time (midnight)
  the stamp of web-server logs: [10/Oct/2000:13:55:36 -0700], with or without brackets
  epoch numbers in s, ms, us or ns; "auto" takes each value by its magnitude: below 1e11 seconds, below
      1e14 ms, below 1e17 us, else ns (so ms, us and ns before 3 March 1973 must be named, not guessed)

Stamps without an offset are local to the format's time zone. A time that occurs twice (the clock was put
back) is taken as its first occurrence; a time that does not exist (put forward) is read with the offset
before the change (PEP 495, fold = 0). A second 60 is the first moment of the next minute. Fractions beyond
the ninth digit are cut off. Numbers of JSON with a fraction are rounded to the microsecond: a float holds no
more. Years 1970 to 2200; all else is NO_STAMP.
"""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Sequence
from zoneinfo import ZoneInfo

import numpy as np
from numpy.typing import NDArray

from monitor.parse.stamp_digits import NS, days_in, days_since_1970, read_matrix

NO_STAMP = int(np.iinfo(np.int64).min)
LAST = (days_since_1970(2201, 1, 1) * 86400) * NS  # the first moment that is too late
UNITS = {"s": NS, "ms": 1_000_000, "us": 1000, "ns": 1}

_ISO = re.compile(
    r"(\d{4})-(\d\d)-(\d\d)(?:[Tt ](\d\d):(\d\d)(?::(\d\d)(?:[.,](\d+))?)?(?: ?([Zz])| ?([+-])(\d\d):?(\d\d))?)?",
    re.ASCII,
)
_LOG = re.compile(
    r"(\[)?(\d\d)/([A-Z][a-z][a-z])/(\d{4}):(\d\d):(\d\d):(\d\d)(?: ([+-])(\d\d):?(\d\d))?(?(1)\])", re.ASCII
)
_EPOCH = re.compile(r"(\d{1,19})(?:\.(\d+))?", re.ASCII)
_MONTHS = {"JanFebMarAprMayJunJulAugSepOctNovDec"[3 * i : 3 * i + 3]: i + 1 for i in range(12)}
_FEWEST_FOR_ARRAYS = 16


class StampReader:
    """Reads stamps of one time zone and one unit of numeric times.

    Raises zoneinfo.ZoneInfoNotFoundError or ValueError for an unknown zone.
    """

    def __init__(self, timezone: str = "UTC", unit: str = "auto") -> None:
        self._zone = None if timezone == "UTC" else ZoneInfo(timezone)
        self.unit = unit
        self._offsets: dict[int, int] = {}

    def texts(self, texts: Sequence[str]) -> NDArray[np.int64]:
        """Stamps as text -> int64 (n,), NO_STAMP where a text is no usable time."""
        if len(texts) < _FEWEST_FOR_ARRAYS:
            return np.fromiter((self.text(t) for t in texts), np.int64, len(texts))
        if len(set(map(len, texts))) == 1:
            return self._of_one_length(texts)
        out = np.full(len(texts), NO_STAMP, np.int64)
        lengths = np.fromiter(map(len, texts), np.int64, len(texts))
        for length in np.unique(lengths).tolist():
            rows = np.flatnonzero(lengths == length)
            out[rows] = self._of_one_length([texts[i] for i in rows.tolist()])
        return out

    def _of_one_length(self, texts: Sequence[str]) -> NDArray[np.int64]:
        length, joined = len(texts[0]), "".join(texts)
        if not 16 <= length <= 40 or not joined.isascii():
            return np.fromiter((self.text(t) for t in texts), np.int64, len(texts))
        matrix = np.frombuffer(joined.encode("ascii"), np.uint8).reshape(len(texts), length)
        out, read = self.matrix(matrix)
        for i in np.flatnonzero(~read).tolist():
            out[i] = self.text(texts[i])
        return out

    def matrix(self, matrix: NDArray[np.uint8]) -> tuple[NDArray[np.int64], NDArray[np.bool_]]:
        """Stamps of one length as ASCII, uint8 (n, length) -> stamps, and which rows were read.

        Rows that were not read may still be good stamps of a rarer form: ask text().
        """
        found = read_matrix(matrix)
        seconds = found.seconds
        if found.local.any():
            seconds = seconds.copy()
            seconds[found.local] -= self._local_offsets(seconds[found.local])
        stamps = seconds * NS + found.fraction
        read = found.read & (stamps >= 0) & (stamps < LAST)
        return np.where(read, stamps, NO_STAMP), read

    def values(self, values: Sequence[object]) -> NDArray[np.int64]:
        """Decoded JSON values (str, int or float; anything else is no time) -> int64 (n,)."""
        kinds = set(map(type, values))
        if kinds == {str}:
            return self.texts(values)  # type: ignore[arg-type]
        if kinds == {float}:
            return self._floats(np.array(values, np.float64))
        return np.fromiter((self.value(v) for v in values), np.int64, len(values))

    def value(self, value: object) -> int:
        """One decoded JSON value."""
        if type(value) is str:
            return self.text(value)
        if type(value) is int:
            return self._integer(value, 0)
        if type(value) is float:
            return int(self._floats(np.array([value]))[0])
        return NO_STAMP

    def text(self, text: str) -> int:
        """One stamp as text."""
        if match := _ISO.fullmatch(text):
            return self._iso(match)
        if match := _EPOCH.fullmatch(text):
            fraction = ((match[2] or "") + "000000000")[:9]
            return self._integer(int(match[1]), int(fraction))
        if match := _LOG.fullmatch(text):
            _, day, month, year, hour, minute, second, sign, ahead, minutes = match.groups()
            if month not in _MONTHS:
                return NO_STAMP
            local = _seconds(int(year), _MONTHS[month], int(day), int(hour), int(minute), int(second))
            return self._utc(local, 0, sign, ahead, minutes)
        return NO_STAMP

    def _iso(self, match: re.Match[str]) -> int:
        year, month, day, hour, minute, second, fraction, zulu, sign, ahead, minutes = match.groups()
        local = _seconds(int(year), int(month), int(day), int(hour or 0), int(minute or 0), int(second or 0))
        nanoseconds = int(((fraction or "") + "000000000")[:9])
        if zulu:
            sign, ahead, minutes = "+", "00", "00"
        return self._utc(local, nanoseconds, sign, ahead, minutes)

    def _utc(self, local: int | None, nanoseconds: int, sign: str | None, ahead: str, minutes: str) -> int:
        if local is None:
            return NO_STAMP
        if sign is None:
            offset = self._offset(local // 60)
        elif int(ahead) > 23 or int(minutes) > 59:
            return NO_STAMP
        else:
            offset = (int(ahead) * 3600 + int(minutes) * 60) * (1 if sign == "+" else -1)
        return _bounded((local - offset) * NS + nanoseconds)

    def _local_offsets(self, local: NDArray[np.int64]) -> NDArray[np.int64]:
        if self._zone is None:
            return np.zeros(local.size, np.int64)
        minutes, where = np.unique(local // 60, return_inverse=True)
        return np.array([self._offset(m) for m in minutes.tolist()], np.int64)[where]

    def _offset(self, minute: int) -> int:
        """Seconds ahead of UTC at a local minute (since 1970 on the local clock)."""
        if self._zone is None:
            return 0
        found = self._offsets.get(minute)
        if found is None:
            if len(self._offsets) > 100_000:  # a hostile log must not grow the memory
                self._offsets.clear()
            moment = dt.datetime(1970, 1, 1, tzinfo=self._zone) + dt.timedelta(minutes=minute)
            ahead = moment.utcoffset()
            found = self._offsets[minute] = 0 if ahead is None else ahead.days * 86400 + ahead.seconds
        return found

    def _integer(self, value: int, nano: int) -> int:
        """An epoch number: integer part, and the fraction in thousand-millionths of its unit."""
        factor = UNITS[self.unit] if self.unit != "auto" else _by_magnitude(value)
        return _bounded(value * factor + nano * factor // NS)

    def _floats(self, values: NDArray[np.float64]) -> NDArray[np.int64]:
        good = (values >= 0) & (values < 1e19)
        held = np.where(good, values, 0.0)
        if self.unit == "auto":
            factor = np.select([held < 1e11, held < 1e14, held < 1e17], [1e6, 1e3, 1.0], 1e-3)
        else:
            factor = np.full(held.size, UNITS[self.unit] / 1000)
        micros = np.rint(held * factor)
        good &= micros < LAST / 1000
        return np.where(good, np.where(good, micros, 0.0).astype(np.int64) * 1000, NO_STAMP)


def _by_magnitude(value: int) -> int:
    if value < 10**11:
        return NS
    if value < 10**14:
        return 1_000_000
    return 1000 if value < 10**17 else 1


def _seconds(year: int, month: int, day: int, hour: int, minute: int, second: int) -> int | None:
    if not 1 <= month <= 12 or hour > 23 or minute > 59 or second > 60 or (second == 60 and minute != 59):
        return None
    if not 1 <= day <= days_in(year, month) or not 1969 <= year <= 2201:
        return None
    return days_since_1970(year, month, day) * 86400 + hour * 3600 + minute * 60 + second


def _bounded(stamp: int) -> int:
    return stamp if 0 <= stamp < LAST else NO_STAMP
