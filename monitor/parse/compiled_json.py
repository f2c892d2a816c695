"""The compiled way for JSON lines, with the reader of records behind it for every line that is not plain."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from monitor.parse.blocks import BOM, Cut, Findings, StreamNames, assemble, cut, mark_unreadable
from monitor.parse.json_lines import JsonReader, path_of
from monitor.parse.kernels import json_scan
from monitor.parse.kernels.scalars import POWERS
from monitor.parse.kernels.words import SPARE, next_bad_text, survey
from monitor.parse.lines import LineFormat, ParsedLines, Parser
from monitor.parse.stamps import UNITS

_SLOTS, _MOST_NAMES = 1 << 16, 1 << 15
_FEWEST_BYTES = 1 << 10
"""Below this, what a run costs by itself is more than what it saves."""
_MOST_NAME_BYTES = 1 << 12


def can_be_compiled(format_: LineFormat) -> bool:
    """Whether the compiled pass knows how to read such lines: no conditions, at most one field names the stream."""
    if format_.lines != "json" or format_.where or len(format_.stream) > 1:
        return False
    paths = [path for path in _paths(format_) if path is not None]
    names = sum(len(name.encode()) + 8 for path in paths for name in path)
    return len(set(paths)) == len(paths) and max(map(len, paths)) < json_scan.DEEPEST and names <= _MOST_NAME_BYTES


def _paths(format_: LineFormat) -> list[tuple[str, ...] | None]:
    """The paths of size, time and stream."""
    fields = (format_.size, format_.time, format_.stream[0] if format_.stream else None)
    keys = ("size", "time", "stream")
    return [None if field is None else path_of(field, key) for field, key in zip(fields, keys, strict=True)]


class CompiledJson:
    """A Parser of JSON lines.

    Parameters: slower, a parser of the same format, which takes what is not worth a run; reader, for doubtful lines.
    """

    def __init__(self, format_: LineFormat, slower: Parser, reader: JsonReader) -> None:
        self._format, self._slower, self._reader = format_, slower, reader
        self._desk = _desk(format_)
        self._names = np.zeros(_SLOTS + 2 * _MOST_NAMES if format_.stream else 1, np.int64)

    def parse(self, block: bytes, *, header: bytes | None = None, first: bool = False) -> ParsedLines:
        if len(block) < _FEWEST_BYTES or block[-1] != 10 or (first and block.startswith(BOM)):
            return self._slower.parse(block, header=header, first=first)
        array = np.frombuffer(block, np.uint8)
        until = block.rfind(b"\n", 0, max(0, len(block) - SPARE)) + 1
        settled = survey(array, until)
        lines, found = self._scanned(block, array, until, settled if settled >= 0 else -1 - settled)
        if settled < 0:
            _doubt_bad_text(lines, found)
        doubtful = np.flatnonzero(found.verdict != json_scan.SETTLED)
        if doubtful.size:
            self._read_doubtful(lines, found, doubtful)
        has_time, has_stream = self._format.time is not None, bool(self._format.stream)
        return assemble(lines, found, scale=1.0, has_time=has_time, has_stream=has_stream)

    def _scanned(self, block: bytes, array: NDArray[np.uint8], until: int, scanned: int) -> tuple[Cut, Findings]:
        """All lines, and what was found in those whose verdict is SETTLED, sizes scaled.

        Parameters: scanned, the number of lines in front of array[until]; those behind it are not settled.
        """
        n = scanned + block.count(b"\n", until)
        starts, ends, stamps = np.empty(n, np.int64), np.empty(n, np.int64), np.empty(n, np.int64)
        status, sizes, codes = np.empty(n, np.uint8), np.empty(n), np.zeros(n, np.int32)
        self._desk[json_scan.TABLE // 8] += 1  # what the table of names holds from the run before is no longer valid
        known = json_scan.scan(array, until, self._desk, self._names, (starts, ends, status, sizes, stamps, codes))
        ends[scanned:] = np.flatnonzero(array[until:] == 10) + until
        starts[scanned:] = np.concatenate(([until], ends[scanned:-1] + 1))
        status[scanned:] = json_scan.DOUBTFUL
        found = Findings(status, sizes, stamps, codes, StreamNames())
        if self._format.stream:
            self._name(block, array, found, known)
        return Cut(block, array, starts, ends), found

    def _name(self, block: bytes, array: NDArray[np.uint8], found: Findings, known: int) -> None:
        """The names that the run met, and its numbers for them as ours."""
        places = self._names[_SLOTS : _SLOTS + 2 * known].reshape(-1, 2) - array.ctypes.data
        # What cannot be decoded stood in a line that is not UTF-8, which comes to nothing later.
        ours = [found.names.code(str(block[i:q], "utf-8", "replace")) for i, q in places.tolist()]
        if ours != list(range(known)):
            found.codes[:] = np.array(ours, np.int32)[found.codes]

    def _read_doubtful(self, lines: Cut, found: Findings, rows: NDArray[np.int64]) -> None:
        """The slower way, for some lines only."""
        block = b"".join(
            [
                lines.block[i:e]
                for i, e in zip(lines.starts[rows].tolist(), (lines.ends[rows] + 1).tolist(), strict=True)
            ]
        )
        some = cut(block)
        theirs = Findings.of(rows.size)
        theirs.names = found.names
        mark_unreadable(some, theirs)
        self._reader.read(some, theirs)
        with np.errstate(over="ignore", under="ignore", invalid="ignore"):
            found.sizes[rows] = theirs.sizes * self._format.scale
        found.verdict[rows], found.stamps[rows], found.codes[rows] = theirs.verdict, theirs.stamps, theirs.codes


def _doubt_bad_text(lines: Cut, found: Findings) -> None:
    """Lines that are not UTF-8 are not settled."""
    at = next_bad_text(lines.bytes_, 0)
    while at >= 0:
        line = int(np.searchsorted(lines.ends, at))
        found.verdict[line] = json_scan.DOUBTFUL
        at = next_bad_text(lines.bytes_, int(lines.ends[line]))


def _desk(format_: LineFormat) -> NDArray[np.int64]:
    """The array on which the compiled pass works, with the format written on it."""
    desk = np.zeros(json_scan.WORDS // 8 + _MOST_NAME_BYTES // 8, np.int64)
    floats = desk.view(np.float64)
    desk[json_scan.UNIT // 8] = UNITS.get(format_.time_unit, 0)
    desk[json_scan.LOCAL_IS_UTC // 8] = format_.timezone == "UTC"
    floats[json_scan.SCALE // 8] = format_.scale
    desk[json_scan.TABLE // 8 + 1 : json_scan.TABLE // 8 + 3] = _SLOTS, _MOST_NAMES
    powers = json_scan.POWERS_OF_TEN // 8
    floats[powers : powers + POWERS] = [float(10**k) for k in range(POWERS)]
    at = json_scan.WORDS
    for f, path in enumerate(_paths(format_)):
        if path is None:
            continue
        desk[json_scan.EVERYTHING // 8] |= 1 << f
        desk[json_scan.FINALS // 8 + len(path) - 1] |= 1 << f
        for depth, name in enumerate(path):
            encoded = name.encode("utf-8")
            padded = np.frombuffer(encoded + bytes(-len(encoded) % 8), np.int64)
            place = json_scan.NAMES // 8 + 2 * (f * json_scan.DEEPEST + depth)
            desk[place : place + 2] = len(encoded), at
            desk[at // 8 : at // 8 + padded.size] = padded
            at += 8 * padded.size
    return desk
