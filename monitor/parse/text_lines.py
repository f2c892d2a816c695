"""What the text formats share: fields are pieces of text; numbers, times and names are read from them.

Fields are stripped of spaces and tabs around them; an empty one is missing. A number is decimal, with a point
and an exponent if need be; "inf" and "nan" in any case are "not finite"; no thousands separators, no
underscores, no units.
"""

from __future__ import annotations

import math
import re
from abc import ABC, abstractmethod
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor import rejects as why
from monitor.parse.blocks import CODE, OK, Cut, Findings
from monitor.parse.lines import Field, FormatError, LineFormat
from monitor.parse.stamps import StampReader
from monitor.parse.tokens import groups_of, sizes_of, stamps_of

_FEWEST_FOR_ARRAYS = 16
_NUMBER = re.compile(r"[+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d+)?", re.ASCII)
_BEYOND = re.compile(r"[+-]?(?:inf|infinity|nan)", re.ASCII | re.IGNORECASE)


def number(text: str) -> float | None:
    """A decimal number (infinite or NaN if the text says so or is beyond floats), None for any other text."""
    if _NUMBER.fullmatch(text):
        return float(text)
    return math.nan if _BEYOND.fullmatch(text) else None


def keyed_fields(format_: LineFormat) -> list[tuple[str, Field]]:
    """All fields that a format names, each with its key."""
    if format_.size is None:
        raise FormatError("size: missing; say where in the line the size stands")
    keyed: list[tuple[str, Field]] = [("size", format_.size)]
    if format_.time is not None:
        keyed.append(("time", format_.time))
    keyed += [("stream", f) for f in format_.stream]
    return keyed + [("where", f) for f, _ in format_.where]


@dataclass(frozen=True, slots=True)
class Places:
    """Where fields stand: for each field the starts and ends, int64 (k,), in the lines `rows`."""

    rows: NDArray[np.int64]
    starts: list[NDArray[np.int64]]
    ends: list[NDArray[np.int64]]

    def only(self, keep: NDArray[np.bool_]) -> Places:
        """The rows to keep."""
        if keep.all():
            return self
        return Places(self.rows[keep], [s[keep] for s in self.starts], [e[keep] for e in self.ends])

    def texts(self, block: bytes, field: int) -> list[bytes]:
        """The texts of one field."""
        starts, ends = self.starts[field].tolist(), self.ends[field].tolist()
        return [block[s:e] for s, e in zip(starts, ends, strict=True)]


class TextReader(ABC):
    """Finds the fields of a LineFormat in lines of text, one by one.

    Subclasses say how a line falls into fields (pick), and where fields stand in many lines at once (places).
    """

    def __init__(self, format_: LineFormat) -> None:
        self._format = format_
        self._stamps = StampReader(format_.timezone, format_.time_unit)
        self.fields: list[Field | None] = [format_.size]
        if format_.time is not None:
            self.fields.append(format_.time)
        self.fields += format_.stream
        self.fields += [field for field, _ in format_.where]
        self._has_time = format_.time is not None

    @abstractmethod
    def pick(self, line: str) -> Sequence[str | None] | str:
        """The texts of self.fields in a line (None: missing), or the reason why it is not of the format."""

    def places(self, cut: Cut, rows: NDArray[np.int64]) -> Places | None:
        """Where the fields stand in many lines at once; None when the format has no such way."""
        return None

    def read(self, cut: Cut, found: Findings) -> None:
        """Fill in what the lines hold; lines with a verdict already are left alone."""
        rows = np.flatnonzero(found.verdict == OK)
        if rows.size >= _FEWEST_FOR_ARRAYS and (places := self.places(cut, rows)) is not None:
            self._settle_many(cut, found, places)
        for i in np.flatnonzero((found.verdict == OK) & np.isnan(found.sizes)).tolist():
            self._settle(i, cut.line(i).decode("utf-8"), found)

    def _settle_many(self, cut: Cut, found: Findings, places: Places) -> None:
        """Lines whose fields are all plain; the others are left without a size for _settle."""
        array = cut.bytes_
        plain = np.ones(places.rows.size, bool)
        for starts, ends in zip(places.starts, places.ends, strict=True):
            first, last = array[starts], array[np.maximum(ends - 1, 0)]
            plain &= (ends > starts) & (first != 32) & (first != 9) & (last != 32) & (last != 9)
        places = places.only(plain)
        conditions = len(self._format.where)
        for k, (_, wanted) in enumerate(self._format.where, len(self.fields) - conditions):
            accepted = {w.encode("utf-8") for w in wanted}
            meant = np.fromiter((t in accepted for t in places.texts(cut.block, k)), bool, places.rows.size)
            found.verdict[places.rows[~meant]] = CODE[why.CONDITION]
            places = places.only(meant)
        sizes = sizes_of(array, places.starts[0], places.ends[0])
        read = ~np.isnan(sizes)
        if self._has_time:
            stamps, known = stamps_of(self._stamps, array, places.starts[1], places.ends[1])
            read &= known
            found.stamps[places.rows] = stamps
        found.sizes[places.rows[read]] = sizes[read]
        if self._format.stream and places.rows.size:
            found.codes[places.rows] = self._codes(cut.block, places, found)

    def _codes(self, block: bytes, places: Places, found: Findings) -> NDArray[np.int64]:
        first = 1 + self._has_time
        distinct: list[bytes] = []
        where = np.zeros(places.rows.size, np.int64)
        for k in range(first, first + len(self._format.stream)):
            parts, place = groups_of(block, places.starts[k], places.ends[k])
            if k == first:
                distinct, where = parts, place
            else:  # only the combinations that occur
                pairs, where = np.unique(where * len(parts) + place, return_inverse=True)
                distinct = [distinct[p // len(parts)] + b"/" + parts[p % len(parts)] for p in pairs.tolist()]
        codes = [found.names.code(name.decode("utf-8")) for name in distinct]
        return np.array(codes, np.int64)[where]

    def _settle(self, i: int, line: str, found: Findings) -> None:
        picked = self.pick(line)
        if isinstance(picked, str):
            found.verdict[i] = CODE[picked]
            return
        texts = [None if t is None else (t.strip(" \t") or None) for t in picked]
        first_where = len(texts) - len(self._format.where)
        for text, (_, wanted) in zip(texts[first_where:], self._format.where, strict=True):
            if text not in wanted:
                found.verdict[i] = CODE[why.CONDITION]
                return
        if texts[0] is None:
            found.verdict[i] = CODE[why.FIELD_MISSING]
            return
        size = number(texts[0])
        if size is None:
            found.verdict[i] = CODE[why.NOT_A_NUMBER]
            return
        found.sizes[i] = size
        if self._has_time and texts[1] is not None:
            found.stamps[i] = self._stamps.text(texts[1])
        if self._format.stream:
            parts = texts[1 + self._has_time : first_where]
            found.codes[i] = -1 if None in parts else found.names.code("/".join(parts))  # type: ignore[arg-type]


class NumberReader(TextReader):
    """The line is the size."""

    def pick(self, line: str) -> Sequence[str | None] | str:
        return (line,)

    def places(self, cut: Cut, rows: NDArray[np.int64]) -> Places | None:
        return Places(rows, [cut.starts[rows]], [cut.bare_ends()[rows]])
