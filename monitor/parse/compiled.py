"""The compiled way for whole blocks, with a format's own reader behind it for every line that is not plain."""

from __future__ import annotations

from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from monitor import rejects as why
from monitor.parse.blocks import BOM, CODE, Cut, Findings, StreamNames, assemble, cut, mark_unreadable
from monitor.parse.desks import MOST_NAMES, SLOTS
from monitor.parse.kernels.desk import TABLE
from monitor.parse.kernels.scan import DOUBTFUL, SETTLED, scan
from monitor.parse.kernels.words import SPARE, next_bad_text, survey
from monitor.parse.lines import LineFormat, ParsedLines, Parser

_FEWEST_BYTES = 1 << 10
"""Below this, what a run costs by itself is more than what it saves."""


class Reader(Protocol):
    """Finds a format's fields in lines, whatever they look like."""

    def read(self, cut: Cut, found: Findings) -> None:
        """Fill in what the lines hold; lines with a verdict already are left alone."""
        ...


class CompiledParser:
    """A Parser that settles plain lines in one pass.

    Parameters: desk, the format as the pass needs it (see desks); slower, a parser of the same format, which takes
    what is not worth a run; reader, for doubtful lines; has_header, whether the first line of a file is none.
    """

    def __init__(
        self, format_: LineFormat, desk: NDArray[np.int64], slower: Parser, reader: Reader, *, has_header: bool = False
    ) -> None:
        self._format, self._desk, self._slower, self._reader = format_, desk, slower, reader
        self._has_header = has_header
        self._names = np.zeros(SLOTS + 2 * MOST_NAMES if format_.stream else 1, np.int64)

    def parse(self, block: bytes, *, header: bytes | None = None, first: bool = False) -> ParsedLines:
        if len(block) < _FEWEST_BYTES or block[-1] != 10 or (first and block.startswith(BOM)):
            return self._slower.parse(block, header=header, first=first)
        array = np.frombuffer(block, np.uint8)
        until = block.rfind(b"\n", 0, max(0, len(block) - SPARE)) + 1
        settled = survey(array, until)
        lines, found = self._scanned(block, array, until, settled if settled >= 0 else -1 - settled)
        if settled < 0:
            _doubt_bad_text(lines, found)
        doubtful = np.flatnonzero(found.verdict != SETTLED)
        if first and self._has_header:
            found.verdict[0] = CODE[why.HEADER]
            doubtful = doubtful[doubtful > 0]
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
        self._desk[TABLE // 8] += 1  # what the table of names holds from the run before is no longer valid
        known = scan(array, until, self._desk, self._names, (starts, ends, status, sizes, stamps, codes))
        ends[scanned:] = np.flatnonzero(array[until:] == 10) + until
        starts[scanned:] = np.concatenate(([until], ends[scanned:-1] + 1))
        status[scanned:] = DOUBTFUL
        found = Findings(status, sizes, stamps, codes, StreamNames())
        if self._format.stream:
            self._name(block, array, found, known)
        return Cut(block, array, starts, ends), found

    def _name(self, block: bytes, array: NDArray[np.uint8], found: Findings, known: int) -> None:
        """The names that the run met, and its numbers for them as ours."""
        places = self._names[SLOTS : SLOTS + 2 * known].reshape(-1, 2) - array.ctypes.data
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
        found.verdict[line] = DOUBTFUL
        at = next_bad_text(lines.bytes_, int(lines.ends[line]))
