"""Counts in sentences: thousands apart, as everywhere in the program, and one event in the singular."""

from __future__ import annotations


def grouped(count: int) -> str:
    """1234567 as "1 234 567"."""
    return f"{count:,}".replace(",", " ")


def counted(count: int, noun: str = "event") -> str:
    """1 as "1 event", 2000 as "2 000 events"."""
    return f"{grouped(count)} {noun}" if count == 1 else f"{grouped(count)} {noun}s"


def are(count: int) -> str:
    """The verb that goes with a count."""
    return "is" if count == 1 else "are"
