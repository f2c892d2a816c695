"""What every page of the screen is made of: its size, its styled lines, its head and its keys."""

from __future__ import annotations

from collections.abc import Sequence

import msgspec
from rich.text import Text

from monitor.render.safe import plain, shorten, width_of, wrapped
from monitor.render.times import moment_text

ABNORMAL = "bold red"
"""The one colour; words say the same, so that nothing is lost without it."""
STRONG = "bold"


class Look(msgspec.Struct, frozen=True, kw_only=True):
    """The terminal: its size in cells, and whether it takes ASCII only."""

    width: int
    height: int
    ascii_only: bool = False

    def safe(self, text: str) -> str:
        """The text made harmless for this terminal."""
        return plain(text, self.ascii_only)


class Part(msgspec.Struct, frozen=True):
    """Text of one style; markup in it is not interpreted."""

    text: str
    style: str = ""


def styled(look: Look, *parts: Part) -> Text:
    """One line of the screen, cut to the width. The only place where a line for the screen is made."""
    line = Text(no_wrap=True, end="")
    room = look.width
    for part in parts:
        text = shorten(look.safe(part.text), room)
        line.append(text, style=part.style or None)
        room -= width_of(text)
    line.rstrip()
    return line


def paragraph(look: Look, text: str, *, style: str = "", indent: str = "", first: str | None = None) -> list[Text]:
    """A sentence in as many lines as it needs."""
    return [
        styled(look, Part(line, style))
        for line in wrapped(look.safe(text), look.width, indent=indent, first=first)
    ]  # fmt: skip


def head_line(look: Look, title: str, now: int, zone: str) -> Text:
    """Title at the left, local time with zone at the right."""
    clock = moment_text(now, zone, seconds=True)
    room = look.width - width_of(clock) - 2
    if room < 12:
        return styled(look, Part(title, STRONG))
    name = shorten(look.safe(title), room)
    return styled(look, Part(name, STRONG), Part(" " * (room + 2 - width_of(name)) + clock))


def cut_to(look: Look, lines: Sequence[Text], foot: Sequence[Text] = ()) -> list[Text]:
    """The lines with the foot at the bottom edge, exactly as many as the terminal has."""
    foot = foot[: look.height]
    body = list(lines[: look.height - len(foot)])
    space = [Text("", end="")] * (look.height - len(foot) - len(body))
    return [*body, *space, *foot]


class Asked(msgspec.Struct, frozen=True):
    """What stands above the keys: a question or an answer, and the line that is being typed, if one is."""

    text: str
    typed: str | None = None


def foot_lines(look: Look, keys: str, asked: Asked | None = None) -> list[Text]:
    """The bottom edge of a live page: what is asked or answered, then the keys. A typed line shows its end."""
    lines = paragraph(look, asked.text, style=STRONG) if asked is not None else []
    if asked is not None and asked.typed is not None:
        lines.append(styled(look, Part(tail_of(look.safe(f"> {asked.typed}_"), look.width), STRONG)))
    return [*lines, styled(look, Part(keys))]


def tail_of(text: str, width: int) -> str:
    """The text, or as much of its end as fits, with dots before it."""
    if width_of(text) <= width:
        return text
    while width_of(text) > max(0, width - 2):
        text = text[1:]
    return f"..{text}"


def as_text(lines: Sequence[Text]) -> str:
    """The frame as plain text, without the empty lines at its end."""
    return "\n".join(line.plain for line in lines).rstrip("\n")
