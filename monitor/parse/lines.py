"""What lines look like (LineFormat) and what comes out of a block of them (ParsedLines)."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal, Protocol

import msgspec
import numpy as np
from numpy.typing import NDArray

from monitor.errors import DataError, SettingsError
from monitor.rejects import Rejected

__all__ = ["Field", "FormatError", "LineFormat", "ParseSetupError", "ParsedLines", "Parser", "Rejected"]

Field = str | int
"""A field: path in JSON ("order.units"), name or 1-based number of a CSV column, key of a pair,
name or number of a pattern's group, name of a part of a combined log line."""


class FormatError(SettingsError):
    """The description of the lines cannot work, whatever the lines. The message starts with the key."""


class ParseSetupError(DataError):
    """The first line of a file (a CSV header) does not fit the description."""


class LineFormat(msgspec.Struct, frozen=True, kw_only=True):
    """How to read events from lines.

    lines      the format
    size       where the size stands; None for "number" (the line is the size)
    time       where the event's time stands; None: the time of arrival
    stream     where the stream's name stands; several fields are joined with "/"; (): one stream
    where      conditions, all of which must hold: (field, values it may have)
    scale      factor that turns the number in the line into the unit
    pattern    the regular expression of "pattern"
    delimiter  between CSV columns
    header     whether a CSV file's first line names its columns; None: yes if any field is a name
    timezone   IANA name, for stamps without an offset
    time_unit  of numeric times; "auto" decides each value by its magnitude (monitor.parse.stamps)
    """

    lines: Literal["json", "csv", "combined", "pairs", "number", "pattern"]
    size: Field | None = None
    time: Field | None = None
    stream: tuple[Field, ...] = ()
    where: tuple[tuple[Field, tuple[str, ...]], ...] = ()
    scale: float = 1.0
    pattern: str | None = None
    delimiter: str = ","
    header: bool | None = None
    timezone: str = "UTC"
    time_unit: Literal["auto", "s", "ms", "us", "ns"] = "auto"


@dataclass(frozen=True, slots=True)
class ParsedLines:
    """The events of one block, in line order, and an account of every other line.

    lines         number of lines in the block; always k + sum(skipped) + sum(rejected)
    sizes         float64 (k,), > 0 and finite, scaled to the unit
    stamps        int64 (k,), ns since 1970 UTC; None when the format has no time
    streams       distinct names, in order of first appearance; [""] when the format names no stream
    stream_codes  int32 (k,), index into streams
    starts, ends  int64 (k,), byte offsets of the event's line in the block; the end leaves out the newline
    skipped       reason -> lines that are no events ("blank", "header", "condition")
    rejected      reason -> lines that could not be used
    samples       the first few rejected lines of each reason
    """

    lines: int
    sizes: NDArray[np.float64]
    stamps: NDArray[np.int64] | None
    streams: list[str]
    stream_codes: NDArray[np.int32]
    starts: NDArray[np.int64]
    ends: NDArray[np.int64]
    skipped: dict[str, int]
    rejected: dict[str, int]
    samples: tuple[Rejected, ...]


class Parser(Protocol):
    """A compiled LineFormat."""

    def parse(self, block: bytes, *, header: bytes | None = None, first: bool = False) -> ParsedLines:
        """Read a block of whole lines, each ended by a newline.

        header  first line of the file, for a CSV file whose columns have names
        first   the block starts with the file's first line (a header line is then skipped and counted)

        Raises ParseSetupError when the header lacks a column that the format names.
        """
        ...
