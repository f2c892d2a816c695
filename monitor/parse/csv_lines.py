"""CSV after RFC 4180, one record a line.

A quoted field may hold delimiters and doubled quotes but no newline: lines are the unit of account here, so the
halves of a record broken over lines are both rejected (a quote that does not close; a quote inside an unquoted
field). When the file has a header, every line must have as many columns as it: a half line with the wanted
column by chance is no event.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from monitor import rejects as why
from monitor.parse.blocks import Cut
from monitor.parse.lines import Field, FormatError, LineFormat, ParseSetupError
from monitor.parse.text_lines import Places, TextReader, keyed_fields


class CsvReader(TextReader):
    """Reads CSV lines whose columns are known."""

    def __init__(self, format_: LineFormat, columns: dict[Field, int], width: int | None) -> None:
        """columns: 0-based place of each field; width: number of columns every line must have, None: any."""
        super().__init__(format_)
        self._delimiter = format_.delimiter
        self._places = [columns[f] for f in self.fields if f is not None]
        self._width = width

    def pick(self, line: str) -> Sequence[str | None] | str:
        columns = split(line, self._delimiter)
        if columns is None:
            return why.NOT_CSV
        if self._width is not None and len(columns) != self._width:
            return why.WRONG_COLUMNS
        return [columns[p] if p < len(columns) else None for p in self._places]

    def places(self, cut: Cut, rows: NDArray[np.int64]) -> Places | None:
        marks = np.flatnonzero(cut.bytes_ == ord(self._delimiter))
        first, count = _marks_of(cut, marks)
        farthest = max(self._places)
        fits = count == self._width - 1 if self._width is not None else count >= farthest
        fits &= ~cut.lines_with(ord('"'))
        rows = rows[fits[rows]]
        first, count = first[rows], count[rows]
        line_starts, line_ends = cut.starts[rows], cut.bare_ends()[rows]
        marks = np.append(marks, 0)  # read, but not used, behind a line's last delimiter
        starts, ends = [], []
        for p in self._places:
            starts.append(marks[first + p - 1] + 1 if p else line_starts)
            ends.append(np.where(count > p, marks[np.minimum(first + p, marks.size - 1)], line_ends))
        return Places(rows, starts, ends)


def _marks_of(cut: Cut, marks: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """For each line the place of its first delimiter in `marks`, and how many it has."""
    n = cut.ends.size
    each, rest = divmod(marks.size, n)
    if each and not rest:
        table = marks.reshape(n, each)
        if (table[:, 0] >= cut.starts).all() and (table[:, -1] < cut.ends).all():
            return np.arange(n) * each, np.full(n, each)
    first = np.searchsorted(marks, cut.starts)
    return first, np.searchsorted(marks, cut.ends) - first


def split(line: str, delimiter: str) -> list[str] | None:
    """The columns of one record; None when its quotes do not make sense."""
    if '"' not in line:
        return line.split(delimiter)
    columns, at = [], 0
    while True:
        if line.startswith('"', at):
            end = at + 1
            while (end := line.find('"', end)) >= 0 and line.startswith('""', end):
                end += 2
            if end < 0:
                return None
            columns.append(line[at + 1 : end].replace('""', '"'))
            at = end + 1
            if at < len(line) and line[at] != delimiter:
                return None
        else:
            end = line.find(delimiter, at)
            text = line[at:] if end < 0 else line[at:end]
            if '"' in text:
                return None
            columns.append(text)
            at = len(line) if end < 0 else end
        if at >= len(line):
            return columns
        at += 1


def has_header(format_: LineFormat) -> bool:
    """Whether the first line of a file names its columns."""
    if format_.header is not None:
        return format_.header
    fields = [format_.size, format_.time, *format_.stream, *(f for f, _ in format_.where)]
    return any(isinstance(f, str) for f in fields)


def check(format_: LineFormat) -> None:
    """Raise FormatError for what cannot work in any file."""
    if len(format_.delimiter) != 1 or not format_.delimiter.isascii() or format_.delimiter in '"\r\n':
        raise FormatError(f"delimiter: {format_.delimiter!r} cannot separate columns; give one ASCII character")
    for key, field in keyed_fields(format_):
        if isinstance(field, int) and (isinstance(field, bool) or field < 1):
            raise FormatError(f"{key}: there is no column {field!r}; columns are numbered from 1")
        if isinstance(field, str) and not has_header(format_):
            raise FormatError(f"{key}: {field!r} is a name, but header = false says that columns have none")


def columns_of(format_: LineFormat, header: bytes | None) -> tuple[dict[Field, int], int | None]:
    """Places of the fields by the header line; and the number of columns that every line must have.

    Raises ParseSetupError when there is no header line, it cannot be read, or it lacks a column.
    """
    if not has_header(format_):
        return {f: f - 1 for _, f in keyed_fields(format_) if isinstance(f, int)}, None
    if header is None:
        raise ParseSetupError("the columns have names, but the first line of the file is not known")
    try:
        text = header.removeprefix(b"\xef\xbb\xbf").decode("utf-8").rstrip("\r\n")
    except UnicodeDecodeError:
        raise ParseSetupError("the header line is not UTF-8") from None
    names = split(text, format_.delimiter)
    if names is None:
        raise ParseSetupError(f"the header line is not CSV: {text[:200]!r}")
    names = [name.strip(" \t") for name in names]
    places: dict[Field, int] = {}
    for key, field in keyed_fields(format_):
        if isinstance(field, int):
            if field > len(names):
                raise ParseSetupError(f"{key}: there is no column {field}; the header line has {len(names)}")
            places[field] = field - 1
        elif names.count(field) != 1:
            there = ", ".join(names[:50])
            how = "no column" if field not in names else "more than one column"
            raise ParseSetupError(f"{key}: {how} is called {field!r}; the header line has: {there}")
        else:
            places[field] = names.index(field)
    return places, len(names)
