"""Raw bytes into whole lines: what to hand on, what to refuse, what to wait for.

Pure. A line longer than the limit is refused as soon as that is certain and skipped to its newline, so memory
stays bounded; the outcome is the same however the bytes come in pieces. NUL bytes at the start of a line are a
hole that a truncation or a power cut left, no line; they are passed over once something stands behind them
(NUL bytes at the very end may be room that the writer took in advance and still fills).
"""

from __future__ import annotations

from dataclasses import dataclass

from monitor.rejects import SAMPLE_BYTES


@dataclass(frozen=True, slots=True)
class Taken:
    """What was taken from the front of some bytes.

    consumed  bytes that are settled; the next call starts behind them
    start     where the whole lines, or the refused line, start
    data      whole lines, each ended by a newline
    refused   first bytes of an over-long line, None when there is none
    holes     NUL bytes passed over
    skipping  the settled bytes end inside an over-long line
    """

    consumed: int
    start: int
    data: bytes
    refused: bytes | None
    holes: int
    skipping: bool


def take(raw: bytes, *, skipping: bool, max_line: int, final: bool) -> Taken:
    """Take whole lines from the front of raw bytes.

    skipping  raw starts inside an over-long line that was refused already
    final     nothing will follow: an unended last line is a line
    """
    at = 0
    if skipping:
        at = raw.find(b"\n") + 1
        if at == 0:
            return Taken(len(raw), 0, b"", None, 0, True)
    start = at + _nulls(raw, at)
    if start == len(raw):  # nothing behind the NUL bytes yet
        return Taken(len(raw) if final else at, at, b"", None, start - at if final else 0, False)
    holes = start - at
    hole = raw.find(b"\n\0", start) if raw.find(b"\0", start) >= 0 else -1  # the short search is the fast one
    last = raw.rfind(b"\n", start) if hole < 0 else hole
    if last < 0:
        return _unended(raw, start, holes, max_line, final)
    end = last + 1
    bad = _first_over_long(raw, start, end, max_line)
    if bad is None:
        return Taken(end, start, raw[start:end], None, holes, False)
    if bad > start:
        return Taken(bad, start, raw[start:bad], None, holes, False)
    return Taken(raw.index(b"\n", start) + 1, start, b"", raw[start : start + SAMPLE_BYTES], holes, False)


def _unended(raw: bytes, start: int, holes: int, max_line: int, final: bool) -> Taken:
    if len(raw) - start > max_line:
        return Taken(len(raw), start, b"", raw[start : start + SAMPLE_BYTES], holes, not final)
    if final:
        return Taken(len(raw), start, raw[start:] + b"\n", None, holes, False)
    return Taken(start, start, b"", None, holes, False)


def _nulls(raw: bytes, at: int) -> int:
    """NUL bytes from a place on."""
    if raw[at : at + 1] != b"\0":
        return 0
    rest = raw[at:]
    return len(rest) - len(rest.lstrip(b"\0"))


def _first_over_long(raw: bytes, start: int, end: int, max_line: int) -> int | None:
    """Where the first line over the limit starts. Jumps: only a newline every max_line bytes is looked for."""
    at = start
    while end - at > max_line + 1:
        newline = raw.rfind(b"\n", at, at + max_line + 1)
        if newline < 0:
            return at
        at = newline + 1
    return None
