"""Exact quoting of text from outside in a settings file (TOML 1.0)."""

from __future__ import annotations

import re

from monitor.render.safe import plain

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_SHORT = {'"': '\\"', "\\": "\\\\", "\b": "\\b", "\t": "\\t", "\n": "\\n", "\f": "\\f", "\r": "\\r"}


def quoted(text: str) -> str:
    """The text as a basic string: reading it gives exactly the text; nothing in it acts on a terminal."""
    return '"' + "".join(_SHORT.get(char) or _escaped(char) for char in text) + '"'


def _escaped(char: str) -> str:
    if plain(char) == char and char != "\x7f":
        return char
    code = ord(char)
    return f"\\u{code:04X}" if code < 0x10000 else f"\\U{code:08X}"


def key(text: str) -> str:
    """The text as a key: bare if it can be."""
    return text if _BARE.fullmatch(text) else quoted(text)


def value(item: str | int | bool | tuple[str | int, ...]) -> str:
    """A string, number, truth value or list of them."""
    if isinstance(item, bool):
        return "true" if item else "false"
    if isinstance(item, int):
        return str(item)
    if isinstance(item, tuple):
        return f"[{', '.join(value(part) for part in item)}]"
    return quoted(item)


def comment(text: str, width: int = 116, *, hanging: str = "#   ", first: str = "# ") -> list[str]:
    """The text as comment lines; control characters cannot stand in a comment and are shown as escapes."""
    lines, current = [], first
    for word in plain(text).split(" "):
        while len(word) > width - 4:  # a hostile "word" may be a whole line
            lines.append(current + word[: width - len(current)])
            word, current = word[width - len(current) :], hanging
        if len(current) + len(word) > width and current not in (first, hanging):
            lines.append(current.rstrip())
            current = hanging
        current += word + " "
    return [*lines, current.rstrip()]
