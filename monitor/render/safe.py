"""The one place that makes text from outside harmless, and measures text in terminal cells.

Names of streams, fields and files come from logs and may hold anything: escape sequences that repaint the
terminal, marks that turn the reading direction, characters nobody can see. All text that reaches a terminal
passes `plain`, which shows such characters as escapes instead of sending them. No markup is ever interpreted.
"""

from __future__ import annotations

import re
import unicodedata
from functools import lru_cache

from rich.cells import cell_len, set_cell_size

# Cc control, Cf format (turns of direction, joiners), Cs half characters, Co private, Cn unassigned,
# Zl/Zp separators of lines and paragraphs.
_HIDDEN = {"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"}
_MARKS_IN_A_ROW = 2
"""Accents stacked higher than this climb over the neighbouring lines."""


@lru_cache(maxsize=4096)
def plain(text: str, ascii_only: bool = False) -> str:
    """The text with every character that could act on a terminal shown as an escape such as \\x1b.

    Doing it twice changes nothing. With ascii_only everything beyond ASCII becomes an escape too, for
    terminals and files that could not take it.
    """
    if text.isascii() and text.isprintable():
        return text
    out: list[str] = []
    marks = _MARKS_IN_A_ROW  # a mark at the very start would sit on whatever stands before the text
    for char in text:
        kind = unicodedata.category(char)
        marks = marks + 1 if kind in ("Mn", "Me") else 0
        hidden = kind in _HIDDEN or (kind == "Zs" and char != " ")
        # Variation selectors change a character's width in some terminals and not in others.
        hidden = hidden or marks > _MARKS_IN_A_ROW or "\ufe00" <= char <= "\ufe0f"
        out.append(_escape(char) if hidden or (ascii_only and not char.isascii()) else char)
    return "".join(out)


def _escape(char: str) -> str:
    code = ord(char)
    if code < 0x100:
        return f"\\x{code:02x}"
    return f"\\u{code:04x}" if code < 0x10000 else f"\\U{code:08x}"


def width_of(text: str) -> int:
    """Terminal cells that the text takes; wide characters take two."""
    return cell_len(text)


def shorten(text: str, width: int, dots: str = "..") -> str:
    """The text, cut with `dots` to at most `width` cells."""
    if cell_len(text) <= width:
        return text
    if width <= len(dots):
        return dots[:width]
    return set_cell_size(text, width - len(dots)).rstrip() + dots


def padded(text: str, width: int, dots: str = "..", *, right: bool = False) -> str:
    """The text cut or filled with spaces to exactly `width` cells; with `right` moved to the right edge."""
    text = shorten(text, width, dots)
    space = " " * (width - cell_len(text))
    return space + text if right else text + space


# A space between digits ("10 000"), or before a per cent sign, belongs to a number and is no place to break a line.
_BREAKS = re.compile(r"(?<![0-9]) +| +(?![0-9%])")


def wrapped(text: str, width: int, *, indent: str = "", first: str | None = None) -> list[str]:
    """The text in lines of at most `width` cells; words longer than a line are cut in pieces.

    Parameters: indent goes before every line, `first` (default: indent) before the first one.
    """
    lines: list[str] = []
    lead = indent if first is None else first
    room = max(1, width - max(cell_len(indent), cell_len(lead)))
    current = ""
    for word in (piece for whole in _BREAKS.split(text) if whole for piece in _pieces(whole, room)):
        if current and cell_len(current) + 1 + cell_len(word) > room:
            lines.append(lead + current)
            lead, current = indent, word
        else:
            current = f"{current} {word}" if current else word
    return [*lines, lead + current] if current else lines


def _pieces(word: str, room: int) -> list[str]:
    pieces = []
    while cell_len(word) > room:
        cut = next(n for n in range(len(word), 0, -1) if n == 1 or cell_len(word[:n]) <= room)
        pieces.append(word[:cut])
        word = word[cut:]
    return [*pieces, word]
