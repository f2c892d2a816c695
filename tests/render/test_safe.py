"""Text from outside cannot act on a terminal, and no text is wider than it is given room."""

from __future__ import annotations

import unicodedata

from hypothesis import given
from hypothesis import strategies as st

from monitor.render.frame import Look, Part, as_text, paragraph, styled
from monitor.render.safe import padded, plain, shorten, width_of, wrapped

HOSTILE = [
    "\x1b[2J", "\x1b]0;title\x07", "\u202etxt.exe", "\u2066a\u2069", "a\r\nb", "\x9b31m", "\u200bzero", "\ufeffmark",
    "\u2028line", "a\u0301\u0301\u0301\u0301\u0301", "\ud800", "[red]x[/red]", "\u00a0",
]  # fmt: skip


def acting(text: str) -> list[str]:
    """Characters of a text that a terminal could act upon (categories of Unicode Standard Annex 44, table 12)."""
    return [char for char in text if unicodedata.category(char) in {"Cc", "Cf", "Cs", "Co", "Cn", "Zl", "Zp"}]


@given(st.text(st.characters()) | st.sampled_from(HOSTILE))
def test_nothing_that_acts_on_a_terminal_is_left(text: str) -> None:
    safe = plain(text)
    assert acting(safe) == []
    assert plain(safe) == safe
    assert plain(text, True).isascii()


def test_hostile_characters_are_shown_and_friendly_ones_stay() -> None:
    assert plain("\x1b[2J") == "\\x1b[2J"
    assert plain("a\u202eb") == "a\\u202eb"
    assert plain("倉庫 é ü Ω") == "倉庫 é ü Ω"
    assert plain("é", True) == "\\xe9"


def test_markup_is_never_interpreted() -> None:
    line = styled(Look(width=40, height=1), Part("[bold red]dock[/] :warning:"))
    assert line.plain == "[bold red]dock[/] :warning:"
    assert line.spans == []


@given(st.text(max_size=60), st.integers(1, 30))
def test_shortened_and_padded_text_takes_the_cells_it_was_given(text: str, width: int) -> None:
    safe = plain(text)
    assert width_of(shorten(safe, width)) <= width
    assert width_of(padded(safe, width)) == width


@given(st.text("ab倉 \n0123456789", max_size=80), st.integers(4, 30))
def test_wrapping_keeps_every_word_and_the_width(text: str, width: int) -> None:
    lines = wrapped(plain(text), width, indent="  ", first="")
    assert all(width_of(line) <= width for line in lines)
    assert "".join("".join(lines).split()) == "".join(plain(text).split())


def test_a_number_is_never_broken_between_its_thousands() -> None:
    lines = wrapped("one event in 10 000 now passes 1 234 567 units", 16)
    assert lines == ["one event in", "10 000 now", "passes 1 234 567", "units"]
    assert wrapped("now 18 % of events", 7) == ["now", "18 % of", "events"]


def test_a_paragraph_is_made_safe_before_it_is_measured() -> None:
    text = as_text(paragraph(Look(width=20, height=9), "\x1b\x1b\x1b\x1b\x1b\x1b name"))
    assert "\x1b" not in text
    assert all(width_of(line) <= 20 for line in text.splitlines())
