"""Many fields at once: pieces of one block, told by their places, into numbers, stamps and stream codes.

Only the plain and common is read here, and exactly as the one-by-one readers would; whatever else a piece may
be, it is marked as not read and left to them.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.parse.stamp_digits import NS
from monitor.parse.stamps import LAST, NO_STAMP, UNITS, StampReader

_LONGEST_NUMBER = 19
_EXACT_DIGITS = 15  # a whole number of 15 digits and a power of ten up to 22 are exact floats,
_POWERS = 10.0 ** np.arange(23)  # so their quotient is the float nearest to the decimal number
_LONGEST_STAMP = 40
_MASKS = np.array([(1 << 8 * n) - 1 for n in range(9)], np.uint64)
_MIX = np.array([0x9E3779B97F4A7C15, 0xC2B2AE3D27D4EB4F, 0x165667B19E3779F9], np.uint64)  # odd, well mixed

Places = NDArray[np.int64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Digits:
    """Plain decimal numbers: value = +-whole / 10**places, for the rows that were read."""

    whole: NDArray[np.int64]
    places: NDArray[np.int64]
    negative: Mask
    count: NDArray[np.int64]
    read: Mask


def digits_of(array: NDArray[np.uint8], starts: Places, ends: Places) -> Digits:
    """Read pieces such as 12, -12.50, 0.001: digits with at most one point, perhaps a minus before them."""
    n, lengths = starts.size, ends - starts
    read = (lengths > 0) & (lengths <= _LONGEST_NUMBER)
    whole, count = np.zeros(n, np.int64), np.zeros(n, np.int64)
    places, dots = np.zeros(n, np.int64), np.zeros(n, np.int64)
    longest = int(lengths[read].max(initial=0))
    at = np.where(read, starts, 0)
    negative = read & (array[at] == ord("-"))
    last = array.size - 1
    for step in range(longest):
        inside = read & (step < lengths)
        byte = array[np.minimum(at + step, last)]
        digit = byte - np.uint8(48)
        is_digit = inside & (digit <= 9)
        is_dot = inside & (byte == ord("."))
        whole = np.where(is_digit, whole * 10 + digit, whole)
        count += is_digit
        places += is_digit & (dots > 0)
        dots += is_dot
        fits = is_digit | is_dot if step else is_digit | is_dot | negative
        read &= fits | ~inside
    read &= (count > 0) & (count <= 18) & (dots <= 1)
    return Digits(whole, places, negative, count, read)


def sizes_of(array: NDArray[np.uint8], starts: Places, ends: Places) -> NDArray[np.float64]:
    """Pieces as float64, NaN where not read; the nearest float, as float() gives it."""
    d = digits_of(array, starts, ends)
    read = d.read & (d.count <= _EXACT_DIGITS)
    values = np.where(read, d.whole, 0) / _POWERS[np.where(read, d.places, 0)]
    return np.where(read, np.where(d.negative, -values, values), np.nan)


def stamps_of(
    reader: StampReader, array: NDArray[np.uint8], starts: Places, ends: Places
) -> tuple[NDArray[np.int64], Mask]:
    """Pieces as stamps, and which were read (others may be stamps of a rarer form, or none)."""
    stamps, read = np.full(starts.size, NO_STAMP, np.int64), np.zeros(starts.size, bool)
    lengths = ends - starts
    for length in np.unique(lengths).tolist():
        rows = np.flatnonzero(lengths == length)
        if not 0 < length <= _LONGEST_STAMP:
            continue
        if length < _LONGEST_NUMBER:
            stamps[rows], read[rows] = _epochs(reader, digits_of(array, starts[rows], ends[rows]), length)
            left = rows[~read[rows]]
        else:
            left = rows
        if left.size and length >= 16:
            matrix = array[starts[left][:, None] + np.arange(length)]
            stamps[left], read[left] = reader.matrix(matrix)
    return stamps, read


def _epochs(reader: StampReader, d: Digits, length: int) -> tuple[NDArray[np.int64], Mask]:
    """Epoch numbers of one length with at most nine places; the others are left."""
    read = d.read & ~d.negative & (d.places <= 9)
    read &= (d.count == length) | ((d.places > 0) & (d.places < d.count))  # digits on both sides of a point
    scale = 10 ** np.where(read, d.places, 0)
    whole = np.where(read, d.whole, 0)
    integer, rest = whole // scale, whole % scale
    if reader.unit == "auto":
        factor = np.select([integer < 10**11, integer < 10**14, integer < 10**17], [NS, 1_000_000, 1000], 1).astype(
            np.int64
        )
    else:
        factor = np.full(whole.size, UNITS[reader.unit], np.int64)
    read &= integer < LAST // factor  # the very last moments are left to the one-by-one reader
    integer, rest = np.where(read, integer, 0), np.where(read, rest, 0)
    return integer * factor + rest * (NS // scale) * factor // NS, read


def groups_of(block: bytes, starts: Places, ends: Places) -> tuple[list[bytes], NDArray[np.int64]]:
    """Distinct pieces, and for each row the place of its piece among them. Exact."""
    lengths = ends - starts
    if starts.size and lengths.max() <= 16:
        # Sixteen bytes are two words; rows that fall into one slot are compared word by word.
        padded = np.frombuffer(block + bytes(16), np.uint8)
        words = np.ndarray((padded.size - 7,), np.dtype("<u8"), padded.data, strides=(1,))
        low = words[starts] & _MASKS[np.minimum(lengths, 8)]
        high = words[np.minimum(starts + 8, words.size - 1)] & _MASKS[np.maximum(lengths - 8, 0)]
        mixed = (low * _MIX[0]) ^ (high * _MIX[1]) ^ (lengths.astype(np.uint64) * _MIX[2])
        slot = (mixed >> np.uint64(52)).astype(np.int64)
        one = np.full(1 << 12, -1)
        one[slot] = np.arange(slot.size)
        same = one[slot]
        if ((low == low[same]) & (high == high[same]) & (lengths == lengths[same])).all():
            rows = one[one >= 0]
            place = np.zeros(1 << 12, np.int64)
            place[one >= 0] = np.arange(rows.size)
            return [block[starts[r] : ends[r]] for r in rows.tolist()], place[slot]
    texts = [block[s:e] for s, e in zip(starts.tolist(), ends.tolist(), strict=True)]
    places = {text: i for i, text in enumerate(dict.fromkeys(texts))}
    return list(places), np.fromiter(map(places.__getitem__, texts), np.int64, len(texts))
