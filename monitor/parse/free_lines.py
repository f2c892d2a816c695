"""Lines of web-server logs, of key=value pairs, and of a regular expression."""

from __future__ import annotations

import re
from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from monitor import rejects as why
from monitor.parse.blocks import Cut
from monitor.parse.combined_places import log_places
from monitor.parse.lines import FormatError, LineFormat
from monitor.parse.pattern_guard import LONGEST_LINE, Unsafe, check_pattern
from monitor.parse.text_lines import Places, TextReader, keyed_fields

_QUOTED = r'"((?:[^"\\]|\\.)*)"'
_COMBINED = re.compile(
    rf"(\S+) (\S+) (\S+) \[([^\]]*)\] {_QUOTED} (\d{{3}}|-) (\S+)(?: {_QUOTED} {_QUOTED})?(?: .*)?",
    re.ASCII | re.DOTALL,
)
COMBINED_PARTS = ("host", "ident", "user", "time", "request", "status", "bytes", "referer", "agent")
REQUEST_PARTS = ("method", "path", "protocol")


class CombinedReader(TextReader):
    """The combined (or common) log format of web servers; what stands behind its fields is passed over.

    The fields are COMBINED_PARTS and, of the request, REQUEST_PARTS. A "-" is a missing value.
    """

    def __init__(self, format_: LineFormat) -> None:
        super().__init__(format_)
        for key, field in keyed_fields(format_):
            if field not in COMBINED_PARTS + REQUEST_PARTS:
                there = ", ".join(COMBINED_PARTS + REQUEST_PARTS)
                raise FormatError(f"{key}: {field!r} is no part of a combined log line; there are: {there}")
        self._simple = not {"referer", "agent"} & {f for _, f in keyed_fields(format_)}

    def pick(self, line: str) -> Sequence[str | None] | str:
        match = _COMBINED.fullmatch(line)
        if match is None:
            return why.NOT_COMBINED
        parts = dict(zip(COMBINED_PARTS, match.groups(), strict=True))
        words = (match[5] or "").split(" ")
        parts.update(zip(REQUEST_PARTS, words if len(words) == 3 else [None] * 3, strict=True))
        found = [parts[str(f)] for f in self.fields]
        return [None if text == "-" else text for text in found]

    def places(self, cut: Cut, rows: NDArray[np.int64]) -> Places | None:
        if not self._simple:
            return None
        found = log_places(cut)
        rows = rows[found.good[rows]]
        starts = [found.starts[str(f)][rows] for f in self.fields]
        ends = [found.ends[str(f)][rows] for f in self.fields]
        return Places(rows, starts, ends).only(_not_dashes(cut.bytes_, starts, ends))


def _not_dashes(
    array: NDArray[np.uint8], starts: list[NDArray[np.int64]], ends: list[NDArray[np.int64]]
) -> NDArray[np.bool_]:
    """Rows in which no field is a lone dash."""
    good = np.ones(starts[0].size, bool)
    for start, end in zip(starts, ends, strict=True):
        good &= (end - start != 1) | (array[start] != ord("-"))
    return good


class PairsReader(TextReader):
    r"""Pairs key=value between spaces or tabs; a value with spaces stands in quotes ("\"" inside is \").

    Words without "=" are passed over. Of a key that occurs twice the last value counts. A quote anywhere else
    makes the line unreadable: it could hide a pair.
    """

    def __init__(self, format_: LineFormat) -> None:
        super().__init__(format_)
        for key, field in keyed_fields(format_):
            if not isinstance(field, str) or not field or re.search('[ \t="]', field):
                raise FormatError(f'{key}: {field!r} cannot be the key of a pair; give a name such as "units"')

    def pick(self, line: str) -> Sequence[str | None] | str:
        pairs = split_pairs(line)
        if not pairs:
            return why.NOT_PAIRS
        return [pairs.get(str(f)) for f in self.fields]

    def places(self, cut: Cut, rows: NDArray[np.int64]) -> Places | None:
        array = cut.bytes_
        equals = np.flatnonzero(array == ord("="))
        gaps = np.flatnonzero((array == 32) | (array == 9) | (array == 10))
        line_ends = cut.bare_ends()
        good = ~cut.lines_with(ord('"'))
        starts, ends = [], []
        for field in self.fields:
            found = _after_key(array, equals, str(field).encode("utf-8"))
            line = np.searchsorted(cut.ends, found)
            start = np.zeros(cut.ends.size, np.int64)
            start[line] = found + 1
            good &= np.bincount(line, minlength=cut.ends.size) == 1
            starts.append(start)
            ends.append(np.minimum(gaps[np.searchsorted(gaps, start)], line_ends))
        rows = rows[good[rows]]
        return Places(rows, [s[rows] for s in starts], [e[rows] for e in ends])


def _after_key(array: NDArray[np.uint8], equals: NDArray[np.int64], key: bytes) -> NDArray[np.int64]:
    """The equals signs that stand behind a key which is a whole word."""
    at = equals[equals >= len(key)]
    for back, byte in enumerate(reversed(key), 1):
        at = at[array[at - back] == byte]
    before = array[np.maximum(at - len(key) - 1, 0)]
    return np.asarray(at[(before == 32) | (before == 9) | (before == 10) | (at == len(key))], np.int64)


_WORD = re.compile(r'([^ \t="]*)(?:(=)(?:"((?:[^"\\]|\\.)*)"|([^ \t"]*)))?(?:[ \t]+|\Z)', re.DOTALL)


def split_pairs(line: str) -> dict[str, str] | None:
    """The pairs of a line; None when its quotes make no sense."""
    pairs: dict[str, str] = {}
    at, end = len(line) - len(line.lstrip(" \t")), len(line)
    while at < end:
        match = _WORD.match(line, at)
        if match is None:
            return None
        if match[2] and match[1]:
            quoted = match[3]
            pairs[match[1]] = match[4] if quoted is None else re.sub(r"\\(.)", r"\1", quoted, flags=re.DOTALL)
        at = match.end()
    return pairs


class PatternReader(TextReader):
    """A regular expression searched in each line; fields are its groups, by name or number.

    Guarded twice: by what the expression may be (pattern_guard) and by the length of the line.
    """

    def __init__(self, format_: LineFormat) -> None:
        super().__init__(format_)
        if not format_.pattern:
            raise FormatError('pattern: missing; lines = "pattern" needs a regular expression with named groups')
        try:
            self._pattern = check_pattern(format_.pattern)
        except re.error as error:
            raise FormatError(f"pattern: {format_.pattern!r} is no regular expression: {error}") from None
        except Unsafe as error:
            raise FormatError(f"pattern: {format_.pattern!r} could take too long on some line: {error}") from None
        for key, field in keyed_fields(format_):
            if field not in self._pattern.groupindex and field not in range(1, self._pattern.groups + 1):
                there = ", ".join(self._pattern.groupindex) or f"numbers 1 to {self._pattern.groups}"
                raise FormatError(f"{key}: the pattern has no group {field!r}; there are: {there}")

    def pick(self, line: str) -> Sequence[str | None] | str:
        if len(line) > LONGEST_LINE:
            return why.TOO_LONG_FOR_PATTERN
        match = self._pattern.search(line)
        if match is None:
            return why.NO_MATCH
        return [match[f] for f in self.fields if f is not None]

    def places(self, cut: Cut, rows: NDArray[np.int64]) -> Places | None:
        if not cut.block.isascii():  # places of characters are places of bytes only then
            return None
        text, search, fields = (
            cut.block.decode("ascii"),
            self._pattern.search,
            [f for f in self.fields if f is not None],
        )
        short = rows[(cut.ends - cut.starts)[rows] <= LONGEST_LINE]
        kept, spans = [], []
        starts, ends = cut.starts[short].tolist(), cut.bare_ends()[short].tolist()
        for row, start, end in zip(short.tolist(), starts, ends, strict=True):
            if match := search(text[start:end]):
                kept.append(row)
                spans.append([match.span(f) for f in fields])
        if not kept:
            return None
        lines = np.array(kept)
        table = np.array(spans) + cut.starts[lines][:, None, None]  # a group without a match has an empty span
        return Places(lines, list(table[:, :, 0].T), list(table[:, :, 1].T))
