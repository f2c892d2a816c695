"""Known changes: what people announced beforehand, and what it does to alarms and baselines.

Nothing is hidden by a known change: alarms are raised and shown, only their notices wait.
"""

from __future__ import annotations

from collections.abc import Iterable
from fnmatch import fnmatchcase
from typing import Literal

import msgspec

Effect = Literal["hold notices", "not in baseline", "new baseline after"]
EFFECTS: tuple[Effect, ...] = ("hold notices", "not in baseline", "new baseline after")


class KnownChange(msgspec.Struct, frozen=True, kw_only=True):
    """A planned change of the streams that match a pattern, from `start` up to but not including `end` (ns)."""

    start: int
    end: int
    streams: str
    reason: str
    effect: Effect

    def covers(self, stream: str, t: int) -> bool:
        """The change is in force for this stream at this moment."""
        return self.start <= t < self.end and fnmatchcase(stream, self.streams)

    def touches(self, stream: str, start: int, end: int) -> bool:
        """The change and the span [start, end) share time, and it concerns this stream."""
        return self.start < end and start < self.end and fnmatchcase(stream, self.streams)


def hold(known: Iterable[KnownChange], stream: str, t: int) -> KnownChange | None:
    """The change that holds the stream's notices at t: of several the one that ends last; None without one."""
    holding = [one for one in known if one.effect == "hold notices" and one.covers(stream, t)]
    return max(holding, key=lambda one: (one.end, -one.start, one.reason), default=None)


def kept_out(known: Iterable[KnownChange], stream: str, start: int, end: int) -> tuple[KnownChange, ...]:
    """The changes that forbid the span [start, end) to serve as a baseline, oldest first.

    "new baseline after" forbids as well: a window that holds some of the old and some of the new is neither.
    """
    found = [one for one in known if one.effect != "hold notices" and one.touches(stream, start, end)]
    return tuple(sorted(found, key=lambda one: (one.start, one.end, one.reason)))


def new_baseline_after(known: Iterable[KnownChange], stream: str, since: int, t: int) -> KnownChange | None:
    """The last change with "new baseline after" that ended in (since, t]: a new baseline starts at its end."""
    ended = [
        one
        for one in known
        if one.effect == "new baseline after" and since < one.end <= t and fnmatchcase(stream, one.streams)
    ]
    return max(ended, key=lambda one: (one.end, one.start, one.reason), default=None)
