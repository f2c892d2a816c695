"""The sample that a proposal is made from: pieces of files, and the lines in them."""

from __future__ import annotations

from dataclasses import dataclass

import msgspec

LONGEST_LINE = 1 << 16
"""Bytes of a line beyond which it tells nothing worth its time here; the daemon has its own, higher limit."""
MOST_LINES = 12_000


class Piece(msgspec.Struct, frozen=True, kw_only=True):
    """Whole lines from one place of a file, each ended by a newline; `offset` is the place of the first."""

    offset: int
    data: bytes


class FileSample(msgspec.Struct, frozen=True, kw_only=True):
    """What was read of one file.

    name    as the user wrote it, "-" for standard input
    pieces  in the order of the file; the first starts at its first line
    size    bytes of the whole (uncompressed) file, None when that is not known
    """

    name: str
    pieces: tuple[Piece, ...]
    size: int | None


@dataclass(frozen=True, slots=True)
class Line:
    """One line of text; piece numbers tell which lines stood side by side; first: the first of its file."""

    text: str
    piece: int
    first: bool


def lines_of(files: tuple[FileSample, ...]) -> list[Line]:
    """The readable lines that are not blank, at most MOST_LINES, the same share of every piece."""
    pieces = [(piece, i == 0) for file in files for i, piece in enumerate(file.pieces)]
    share = max(50, MOST_LINES // max(1, len(pieces)))
    lines: list[Line] = []
    for number, (piece, heads_file) in enumerate(pieces):
        for i, raw in enumerate(piece.data.split(b"\n")[:share]):
            text = _text(raw)
            if text is not None:
                lines.append(Line(text.removeprefix("\ufeff"), number, heads_file and i == 0))
    return lines


def _text(raw: bytes) -> str | None:
    raw = raw.removesuffix(b"\r")
    if not raw.strip() or len(raw) > LONGEST_LINE:
        return None
    try:
        return raw.decode("utf-8")
    except UnicodeDecodeError:
        return None
