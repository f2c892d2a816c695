"""Numbers, stamps and names at an address, read as plainly as most logs write them.

Each function returns -1 where it is in doubt; then the readers in monitor.parse decide.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from monitor.parse.kernels.compiling import helper, part
from monitor.parse.kernels.words import (
    byte,
    digits_at,
    keep,
    kept,
    kept_float,
    lowest,
    number_at,
    word,
)

_NS = 1_000_000_000
_MONTHS = np.array([int.from_bytes(b"JanFebMarAprMayJunJulAugSepOctNovDec"[3 * k : 3 * k + 3], "little")
                    for k in range(12)], np.uint64)  # fmt: skip
_NO_OFFSET = 1 << 40
_LAST_SECOND = 7_289_568_000  # 2201-01-01, as monitor.parse.stamps has it
_MOST_WHOLE = 9_007_199_254_740_992  # 2^53: whole numbers up to here are exact doubles


@part
def json_number(p: Any, floats: Any, out: Any) -> Any:
    """End of a number without exponent at p, -1 in doubt; the number to out.

    Parameters: floats, where 10^0 .. 10^22 stand as doubles. In doubt is also a number that one division of
    exact doubles would not round correctly.
    """
    negative = byte(p) == 45
    if negative:
        p += 1
    digits = digits_at(p)
    if digits == 0 or digits == 8 or (digits > 1 and byte(p) == 48):
        return _long_number(p, negative, floats, out)
    whole = number_at(p, digits)
    p += digits
    if byte(p) != 46:
        if byte(p) | 32 == 101:
            return np.int64(-1)
        keep(out, -np.float64(whole) if negative else np.float64(whole))
        return p
    places = digits_at(p + 1)
    if places == 0 or places == 8 or byte(p + 1 + places) | 32 == 101:
        return _long_number(p - digits, negative, floats, out)
    value = np.float64(np.int64(whole)) * kept_float(floats + 8 * places)  # below 10^14: exact
    value = (value + np.float64(np.int64(number_at(p + 1, places)))) / kept_float(floats + 8 * places)
    keep(out, -value if negative else value)
    return p + 1 + places


@part
def _long_number(p: Any, negative: Any, floats: Any, out: Any) -> Any:
    """json_number for any number of digits, behind the sign."""
    first, whole = p, np.int64(0)
    while 48 <= byte(p) <= 57:
        whole = whole * 10 + (byte(p) - 48)
        p += 1
    digits, places = p - first, np.int64(0)
    if digits == 0 or (digits > 1 and byte(first) == 48):
        return np.int64(-1)
    if byte(p) == 46:
        p += 1
        first = p
        while 48 <= byte(p) <= 57:
            whole = whole * 10 + (byte(p) - 48)
            p += 1
        places = p - first
        if places == 0:
            return np.int64(-1)
    if byte(p) | 32 == 101 or digits + places > 18 or whole > _MOST_WHOLE:
        return np.int64(-1)
    value = np.float64(whole) / kept_float(floats + 8 * places)
    keep(out, -value if negative else value)
    return p


@part
def past_number(p: Any) -> Any:
    """End of any number by RFC 8259 at p, -1 when it is none."""
    if byte(p) == 45:
        p += 1
    first = p
    while 48 <= byte(p) <= 57:
        p += 1
    if p == first or (p - first > 1 and byte(first) == 48):
        return np.int64(-1)
    if byte(p) == 46:
        first = p + 1
        p = first
        while 48 <= byte(p) <= 57:
            p += 1
        if p == first:
            return np.int64(-1)
    if byte(p) | 32 == 101:
        p += 2 if byte(p + 1) == 43 or byte(p + 1) == 45 else 1
        first = p
        while 48 <= byte(p) <= 57:
            p += 1
        if p == first:
            return np.int64(-1)
    return p


@part
def _two(p: Any) -> Any:
    """Two digits as a number; -1 when they are none."""
    tens, units = byte(p) - 48, byte(p + 1) - 48
    return tens * 10 + units if 0 <= tens <= 9 and 0 <= units <= 9 else np.int64(-1)


@part
def _days(year: Any, month: Any, day: Any) -> Any:
    """Days from 1970 to a date of the years 1970 to 2200, -1 when it is none."""
    if year < 1970 or year > 2200 or month < 1 or month > 12 or day < 1:
        return np.int64(-1)
    leap = year % 4 == 0 and (year % 100 != 0 or year % 400 == 0)
    longest = 31
    if month == 2:
        longest = 29 if leap else 28
    elif month == 4 or month == 6 or month == 9 or month == 11:
        longest = 30
    if day > longest:
        return np.int64(-1)
    # From March on the months have 31 30 31 30 31 days, twice and again: 153 days each five.
    since_march = (month + 9) % 12
    before = year - 1 if month <= 2 else year
    return before * 365 + before // 4 - before // 100 + before // 400 + (153 * since_march + 2) // 5 + day - 719469


@part
def _minute(p: Any) -> Any:
    """Seconds from 1970 to the minute at p, YYYY-MM-DDTHH:MM; -1 in doubt."""
    if byte(p + 4) != 45 or byte(p + 7) != 45 or byte(p + 13) != 58 or (byte(p + 10) != 84 and byte(p + 10) != 32):
        return np.int64(-1)
    century, of_century, hour, minute = _two(p), _two(p + 2), _two(p + 11), _two(p + 14)
    if century < 0 or of_century < 0 or hour < 0 or hour > 23 or minute < 0 or minute > 59:
        return np.int64(-1)
    days = _days(century * 100 + of_century, _two(p + 5), _two(p + 8))
    return (days * 24 + hour) * 3600 + minute * 60 if days >= 0 else np.int64(-1)


@part
def _hour(p: Any) -> Any:
    """Seconds from 1970 to the hour at p, DD/Mon/YYYY:HH: with the English months' names; -1 in doubt."""
    if byte(p + 2) != 47 or byte(p + 6) != 47 or byte(p + 11) != 58 or byte(p + 14) != 58:
        return np.int64(-1)
    month, name = np.int64(0), word(p + 3) & lowest(np.int64(3))
    for k in range(12):
        if name == _MONTHS[k]:
            month = np.int64(k + 1)
    century, of_century, hour = _two(p + 7), _two(p + 9), _two(p + 12)
    if century < 0 or of_century < 0 or hour < 0 or hour > 23:
        return np.int64(-1)
    days = _days(century * 100 + of_century, month, _two(p))
    return (days * 24 + hour) * 3600 if days >= 0 else np.int64(-1)


@part
def stamp(p: Any, q: Any, unit: Any, local_is_utc: Any, desk: Any) -> Any:
    """ns since 1970 UTC of the text between p and q: RFC 3339, as web servers log it, or an epoch number.

    -1 in doubt. Parameters: desk, the place of its PERIOD.
    """
    if q - p >= 19 and byte(p + 4) == 45:
        return _rfc3339(p, q, local_is_utc, desk)
    if q - p >= 20 and (byte(p + 2) == 47 or byte(p + 3) == 47):
        return _log_stamp(p, q, local_is_utc, desk)
    return _epoch_text(p, q, unit)


@part
def _log_stamp(p: Any, q: Any, local_is_utc: Any, desk: Any) -> Any:
    """stamp, for DD/Mon/YYYY:HH:MM:SS with an offset, with or without brackets."""
    if byte(p) == 91:
        if byte(q - 1) != 93:
            return np.int64(-1)
        p += 1
        q -= 1
    if q - p < 20 or byte(p + 17) != 58:
        return np.int64(-1)
    last = word(p + 8) & lowest(7)
    if word(p) == np.uint64(kept(desk)) and last == np.uint64(kept(desk + 8)):
        seconds = kept(desk + 16)
    else:
        seconds = _hour(p)
        if seconds < 0:
            return np.int64(-1)
        keep(desk, word(p))
        keep(desk + 8, last)
        keep(desk + 16, seconds)
    minute, second = _two(p + 15), _two(p + 18)
    if minute < 0 or minute > 59 or second < 0 or second > 59:
        return np.int64(-1)
    p += 20
    offset = np.int64(0)
    if p == q:
        if not local_is_utc:
            return np.int64(-1)
    else:
        offset = _offset(p + 1, q)
        if byte(p) != 32 or offset == _NO_OFFSET:
            return np.int64(-1)
    seconds += minute * 60 + second - offset
    return seconds * _NS if 0 <= seconds < _LAST_SECOND else np.int64(-1)


@part
def _epoch_text(p: Any, q: Any, unit: Any) -> Any:
    """stamp, for digits and perhaps a fraction of at most eight."""
    whole, first = np.int64(0), p
    while q - p >= 1 and 48 <= byte(p) <= 57:
        whole = whole * 10 + (byte(p) - 48)
        p += 1
    if p == first or p - first > 18:
        return np.int64(-1)
    if unit == 0:
        unit = _unit_by_magnitude(whole)
    if whole >= _LAST_SECOND * (_NS // unit):
        return np.int64(-1)
    if p == q:
        return whole * unit
    digits = digits_at(p + 1)
    if byte(p) != 46 or digits == 0 or digits == 8 or p + 1 + digits != q:
        return np.int64(-1)
    nano = np.int64(number_at(p + 1, digits))
    for _ in range(digits, 9):
        nano *= 10
    return whole * unit + nano * unit // _NS


@helper
def _offset(p: Any, q: Any) -> Any:
    """Seconds ahead of UTC of +HH:MM or +HHMM between p and q; _NO_OFFSET in doubt."""
    hours, minutes = _two(p + 1), _two(q - 2)
    if not ((q - p == 6 and byte(p + 3) == 58) or q - p == 5) or (byte(p) != 43 and byte(p) != 45):
        return np.int64(_NO_OFFSET)
    if hours < 0 or hours > 23 or minutes < 0 or minutes > 59:
        return np.int64(_NO_OFFSET)
    offset = hours * 3600 + minutes * 60
    return offset if byte(p) == 43 else -offset


@part
def _rfc3339(p: Any, q: Any, local_is_utc: Any, desk: Any) -> Any:
    """stamp, for the form of RFC 3339; at least 19 bytes."""
    if byte(p + 16) != 58:
        return np.int64(-1)
    if word(p) == np.uint64(kept(desk)) and word(p + 8) == np.uint64(kept(desk + 8)):
        seconds = kept(desk + 16)  # most lines are of the same minute as the one before
    else:
        seconds = _minute(p)
        if seconds < 0:
            return np.int64(-1)
        keep(desk, word(p))
        keep(desk + 8, word(p + 8))
        keep(desk + 16, seconds)
    second = _two(p + 17)
    if second < 0 or second > 59:
        return np.int64(-1)
    seconds += second
    p += 19
    fraction = np.int64(0)
    if p < q and (byte(p) == 46 or byte(p) == 44):
        digits = digits_at(p + 1)
        if digits == 0 or digits == 8:
            return np.int64(-1)
        fraction = np.int64(number_at(p + 1, digits))
        p += 1 + digits
        while digits < 9:
            fraction *= 10
            digits += 1
    offset = np.int64(0)
    if not ((q - p == 1 and byte(p) == 90) or (q == p and local_is_utc)):
        offset = _offset(p, q)
        if offset == _NO_OFFSET:
            return np.int64(-1)
    seconds -= offset
    return seconds * _NS + fraction if 0 <= seconds < _LAST_SECOND else np.int64(-1)


@part
def whole_number(p: Any, out: Any) -> Any:
    """End of a number without sign, point and exponent at p, -1 in doubt; the number to out, as int64."""
    first, whole = p, np.int64(0)
    digits = digits_at(p)
    while digits == 8:
        if p - first == 16:
            return np.int64(-1)
        whole = whole * 100_000_000 + np.int64(number_at(p, digits))
        p += 8
        digits = digits_at(p)
    if p + digits - first > 18 and (p + digits - first > 19 or byte(first) == 57):  # below 9 * 10^18
        return np.int64(-1)
    for _ in range(digits):
        whole = whole * 10 + (byte(p) - 48)
        p += 1
    if p == first or (p - first > 1 and byte(first) == 48) or byte(p) == 46 or byte(p) | 32 == 101:
        return np.int64(-1)
    keep(out, whole)
    return p


@helper
def _unit_by_magnitude(whole: Any) -> Any:
    return np.int64(_NS if whole < 10**11 else 1_000_000 if whole < 10**14 else 1000 if whole < 10**17 else 1)


@helper
def epoch(whole: Any, unit: Any) -> Any:
    """ns of a whole number >= 0 of seconds or parts of it; unit 0 takes each by its magnitude; -1 in doubt."""
    if unit == 0:
        unit = _unit_by_magnitude(whole)
    return whole * unit if whole < _LAST_SECOND * (_NS // unit) else np.int64(-1)


@part
def name_code(p: Any, q: Any, names: Any, known: Any, desk: Any) -> Any:
    """The number of the name between p and q, in order of first appearance; -1 when there is no room for another.

    Parameters: names, place of the table (see NameTable); known, how many there are; desk, place of what the
    table is called in this run.
    """
    run, slots, most = kept(desk), kept(desk + 8), kept(desk + 16)
    length, at = q - p, p
    mixed = np.uint64(length) * np.uint64(0x9E3779B97F4A7C15)
    while length >= 8:
        mixed = (mixed ^ word(at)) * np.uint64(0xC2B2AE3D27D4EB4F)
        mixed ^= mixed >> np.uint64(29)
        at += 8
        length -= 8
    if length:
        mixed = (mixed ^ (word(at) & lowest(length))) * np.uint64(0xC2B2AE3D27D4EB4F)
    mixed ^= mixed >> np.uint64(32)
    slot = np.int64(mixed & np.uint64(slots - 1))
    firsts = names + 8 * slots
    while True:
        held = kept(names + 8 * slot)
        if held >> 20 != run:
            if known >= most:
                return np.int64(-1)
            keep(names + 8 * slot, run << 20 | known)
            keep(firsts + 16 * known, p)
            keep(firsts + 16 * known + 8, q)
            return known
        code = held & 0xFFFFF
        other = kept(firsts + 16 * code)
        if q - p == kept(firsts + 16 * code + 8) - other and _same(p, q, other):
            return code
        slot = (slot + 1) & (slots - 1)


@part
def _same(p: Any, q: Any, other: Any) -> Any:
    """Whether the bytes between p and q stand at `other` too."""
    while q - p >= 8:
        if word(p) != word(other):
            return False
        p += 8
        other += 8
    return p == q or (word(p) ^ word(other)) & lowest(q - p) == 0
