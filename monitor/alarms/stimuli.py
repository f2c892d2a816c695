"""What can happen to an alarm that exists. Times and spans are ns; `by` and `note` are a person's words."""

from __future__ import annotations

import msgspec

from monitor.alarms.alarm import Spoke
from monitor.alarms.states import Choice


class Speaks(msgspec.Struct, frozen=True, kw_only=True):
    """The rule speaks again while its alarm is open."""

    spoke: Spoke


class Measured(msgspec.Struct, frozen=True, kw_only=True):
    """The rule's statistic after a slot, as a share of its threshold: what return to normal is judged by."""

    share: float


class Cleared(msgspec.Struct, frozen=True, kw_only=True):
    """The condition is gone; the caller judged that by itself."""


class Ticked(msgspec.Struct, frozen=True, kw_only=True):
    """Time has passed: delays, shelves, waits and holds may be over."""


class Acknowledge(msgspec.Struct, frozen=True, kw_only=True):
    """A person has seen it."""

    by: str
    note: str | None = None


class Shelve(msgspec.Struct, frozen=True, kw_only=True):
    """A person wants to hear nothing of it for a while."""

    by: str
    until: int
    note: str | None = None


class Unshelve(msgspec.Struct, frozen=True, kw_only=True):
    """A person wants to hear of it again."""

    by: str
    note: str | None = None


class Remove(msgspec.Struct, frozen=True, kw_only=True):
    """A person takes it out of service, and says why."""

    by: str
    note: str


class Restore(msgspec.Struct, frozen=True, kw_only=True):
    """A person puts it back in service."""

    by: str
    note: str | None = None


class Note(msgspec.Struct, frozen=True, kw_only=True):
    """A person writes something into its history."""

    by: str
    text: str


class Decide(msgspec.Struct, frozen=True, kw_only=True):
    """A person concludes something from it.

    until        "wait": when to announce it again; "planned" and "data-fault": the end of what they speak of
                 (None: up to now)
    tail_events  "wait": how many more tail events a verdict needs, as it was shown
    """

    by: str
    choice: Choice
    note: str = ""
    until: int | None = None
    tail_events: int | None = None


Stimulus = Speaks | Measured | Cleared | Ticked | Acknowledge | Shelve | Unshelve | Remove | Restore | Note | Decide
