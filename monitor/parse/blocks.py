"""A block cut into lines, what a format found in each, and the account that comes out.

Every format fills a Findings; assemble() turns it into ParsedLines by rules that are the same for all, in
this order: header, blank, not UTF-8, the format's own reasons, condition, size, time, stream.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor import rejects as why
from monitor.parse.lines import ParsedLines
from monitor.parse.stamps import NO_STAMP
from monitor.rejects import SAMPLE_BYTES, Rejected

SAMPLES_PER_REASON = 3
LONGEST_STREAM_NAME = 200
BOM = b"\xef\xbb\xbf"

OK = 0
VERDICTS = (
    "ok",
    why.HEADER, why.BLANK, why.CONDITION,
    why.NOT_UTF8, why.NOT_JSON, why.TOO_DEEP, why.NOT_CSV, why.WRONG_COLUMNS, why.NOT_COMBINED, why.NOT_PAIRS,
    why.NO_MATCH, why.TOO_LONG_FOR_PATTERN, why.FIELD_MISSING, why.NOT_A_NUMBER, why.NOT_FINITE, why.ZERO,
    why.NEGATIVE, why.NO_TIME, why.BAD_STREAM,
)  # fmt: skip
CODE = {reason: code for code, reason in enumerate(VERDICTS)}
_SKIPS = (CODE[why.HEADER], CODE[why.BLANK], CODE[why.CONDITION])
_WHITE = np.zeros(256, bool)
_WHITE[list(b" \t\r\x0b\x0c")] = True


@dataclass(frozen=True, slots=True)
class Cut:
    """A block and its lines: starts and ends, int64 (n,); an end is the place of the newline."""

    block: bytes
    bytes_: NDArray[np.uint8]
    starts: NDArray[np.int64]
    ends: NDArray[np.int64]

    def line(self, i: int) -> bytes:
        """Line i without its newline and a carriage return before it."""
        return self.block[self.starts[i] : self.ends[i]].removesuffix(b"\r")

    def bare_ends(self) -> NDArray[np.int64]:
        """The ends without a carriage return before the newline."""
        back = (self.bytes_[np.maximum(self.ends - 1, 0)] == 13) & (self.ends > self.starts)
        return np.asarray(self.ends - back, np.int64)

    def lines_with(self, byte: int) -> NDArray[np.bool_]:
        """Which lines hold a byte."""
        hit = np.zeros(self.ends.size, bool)
        at = np.flatnonzero(self.bytes_ == byte)
        if at.size:
            hit[np.searchsorted(self.ends, at)] = True
        return hit


@dataclass(slots=True)
class Findings:
    """What a format found, line by line; only lines with verdict OK have the rest.

    verdict  uint8 (n,), index into VERDICTS
    sizes    float64 (n,), as in the line; not yet scaled or checked
    stamps   int64 (n,), NO_STAMP where unusable
    codes    int32 (n,), index into names, -1 where the stream's name is unusable
    """

    verdict: NDArray[np.uint8]
    sizes: NDArray[np.float64]
    stamps: NDArray[np.int64]
    codes: NDArray[np.int32]
    names: StreamNames

    @classmethod
    def of(cls, n: int) -> Findings:
        """Nothing found yet in n lines."""
        return cls(
            np.zeros(n, np.uint8),
            np.full(n, np.nan),
            np.full(n, NO_STAMP, np.int64),
            np.zeros(n, np.int32),
            StreamNames(),
        )


class StreamNames:
    """Names of streams as they turn up, each with a number; -1 for a name that cannot be one."""

    def __init__(self) -> None:
        self.names: list[str] = []
        self._codes: dict[str, int] = {}

    def code(self, name: str) -> int:
        """The number of a name."""
        found = self._codes.get(name)
        if found is None:
            found = -1
            if usable_name(name):
                found = len(self.names)
                self.names.append(name)
            self._codes[name] = found
        return found


def usable_name(name: str) -> bool:
    """Whether a stream may be called so: not empty, not too long, no control or invisible characters."""
    return 0 < len(name) <= LONGEST_STREAM_NAME and name.isprintable()


def cut(block: bytes) -> Cut:
    """Cut whole lines at their newlines.

    Raises ValueError when the last line has no newline: a caller's mistake that would lose a line.
    """
    if block and block[-1] != 10:
        raise ValueError("a block must end with a newline")
    array = np.frombuffer(block, np.uint8)
    ends = np.flatnonzero(array == 10)
    starts = np.zeros(ends.size, np.int64)
    starts[1:] = ends[:-1] + 1
    return Cut(block, array, starts, ends)


def mark_unreadable(cut_: Cut, findings: Findings) -> None:
    """Mark blank lines and lines that are not UTF-8."""
    starts, ends = cut_.starts, cut_.ends
    maybe = np.flatnonzero(_WHITE[cut_.bytes_[starts]] | (starts == ends))
    for i in maybe.tolist():
        if not cut_.block[starts[i] : ends[i]].strip(b" \t\r\x0b\x0c"):
            findings.verdict[i] = CODE[why.BLANK]
    if cut_.block.isascii():
        return
    view, at = memoryview(cut_.block), 0
    while at < len(view):
        try:
            str(view[at:], "utf-8")
            return
        except UnicodeDecodeError as error:
            i = int(np.searchsorted(starts, at + error.start, side="right")) - 1
            findings.verdict[i] = CODE[why.NOT_UTF8]
            at = int(ends[i]) + 1


def assemble(cut_: Cut, found: Findings, *, scale: float, has_time: bool, has_stream: bool) -> ParsedLines:
    """Judge sizes, times and streams, and draw up the account."""
    verdict = found.verdict
    sizes = found.sizes
    if scale != 1:
        with np.errstate(over="ignore", under="ignore", invalid="ignore"):
            sizes = sizes * scale
    open_ = verdict == OK
    for reason, hit in (
        (why.NOT_FINITE, ~np.isfinite(sizes)),
        (why.ZERO, sizes == 0),
        (why.NEGATIVE, sizes < 0),
        (why.NO_TIME, (found.stamps == NO_STAMP) if has_time else None),
        (why.BAD_STREAM, found.codes < 0),
    ):
        if hit is not None and (hit := hit & open_).any():
            verdict[hit] = CODE[reason]
            open_ &= ~hit
    events = slice(None) if open_.all() else np.flatnonzero(open_)
    names, codes = [""], found.codes[events]
    if has_stream:
        names, codes = _renumbered(found.names.names, codes)
    counts = np.bincount(verdict, minlength=len(VERDICTS)).tolist()
    return ParsedLines(
        lines=verdict.size,
        sizes=sizes[events],
        stamps=found.stamps[events] if has_time else None,
        streams=names,
        stream_codes=codes,
        starts=cut_.starts[events],
        ends=cut_.ends[events],
        skipped={VERDICTS[c]: counts[c] for c in _SKIPS if counts[c]},
        rejected={VERDICTS[c]: n for c, n in enumerate(counts) if n and c != OK and c not in _SKIPS},
        samples=_samples(cut_, verdict, counts),
    )


def _renumbered(names: list[str], codes: NDArray[np.int32]) -> tuple[list[str], NDArray[np.int32]]:
    """Only the names of events, in the order of their first event."""
    if not names:
        return [], codes
    first = np.full(len(names), codes.size)
    first[codes[::-1]] = np.arange(codes.size - 1, -1, -1)  # what is written last stays
    used = np.flatnonzero(first < codes.size)
    order = used[np.argsort(first[used])]
    if order.size == len(names) and (order[1:] > order[:-1]).all():
        return names, codes
    place = np.zeros(len(names), np.int32)
    place[order] = np.arange(order.size, dtype=np.int32)
    return [names[c] for c in order.tolist()], place[codes]


def _samples(cut_: Cut, verdict: NDArray[np.uint8], counts: list[int]) -> tuple[Rejected, ...]:
    taken: list[int] = []
    for code, count in enumerate(counts):
        if count and code != OK and code not in _SKIPS:
            taken += np.flatnonzero(verdict == code)[:SAMPLES_PER_REASON].tolist()
    out = []
    for i in sorted(taken):
        start = int(cut_.starts[i])
        end = min(int(cut_.ends[i]), start + SAMPLE_BYTES)
        out.append(Rejected(VERDICTS[verdict[i]], start, cut_.block[start:end]))
    return tuple(out)
