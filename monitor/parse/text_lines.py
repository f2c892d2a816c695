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

import numpy as np

from monitor import rejects as why
from monitor.parse.blocks import CODE, OK, Cut, Findings
from monitor.parse.lines import Field, FormatError, LineFormat
from monitor.parse.stamps import StampReader

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


class TextReader(ABC):
    """Finds the fields of a LineFormat in lines of text, one by one.

    Subclasses say how a line falls into fields (pick) and may settle many lines at once before (read_fast).
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

    def read_fast(self, cut: Cut, found: Findings) -> None:
        """Settle what can be settled for many lines at once; leave others without a size (NaN)."""
        return

    def read(self, cut: Cut, found: Findings) -> None:
        """Fill in what the lines hold; lines with a verdict already are left alone."""
        self.read_fast(cut, found)
        for i in np.flatnonzero((found.verdict == OK) & np.isnan(found.sizes)).tolist():
            self._settle(i, cut.line(i).decode("utf-8"), found)

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
