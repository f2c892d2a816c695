"""The records of alarms: what a rule said, the alarm made of it, each change of it, and what is to be told."""

from __future__ import annotations

from hashlib import blake2b
from typing import Literal

import msgspec

from monitor.alarms.known import KnownChange
from monitor.alarms.priorities import Priority, Rule
from monitor.alarms.states import Choice, State

Direction = Literal["heavier", "lighter"]

Measure = Literal["level", "share", "rate", "size", "silence", "none"]
"""What `before` and `after` of an alarm are.

level    the size passed once in so many events, in the stream's unit
share    a share of events or lines, 0 to 1
rate     something a day
size     one size, in the stream's unit: `after` is the event's, `before` the limit or the largest seen before
silence  seconds between events: `after` how long there has been none, `before` the usual gap
none     the rule has no figure
"""


class Spoke(msgspec.Struct, frozen=True, kw_only=True):
    """What a rule said, in the terms that people are told. Times are ns of event time.

    events           how many events its evidence rests on since the watch began or began again
    changed_at       the likeliest moment of the change, and the set that holds it with the promised chance
    before, after    one measure of the stream, before and after the change, in `unit`; None where it has none
    cause            what stands behind it where a rule has several possibilities
    """

    stream: str
    rule: Rule
    at: int
    events: int
    direction: Direction | None = None
    changed_at: int | None = None
    changed_between: tuple[int, int] | None = None
    unit: str = ""
    measure: Measure = "none"
    before: float | None = None
    after: float | None = None
    cause: str | None = None


class Decision(msgspec.Struct, frozen=True, kw_only=True):
    """What a person concluded, with the figures that were shown to them."""

    choice: Choice
    at: int
    by: str
    note: str
    unit: str
    before: float | None
    after: float | None
    tail_events: int | None = None
    """For "wait": how many more tail events a verdict needs."""


class Alarm(msgspec.Struct, frozen=True, kw_only=True):
    """One alarm, from the moment its rule spoke. Times and spans are ns.

    found_at       when the rule said what stands here: direction, change, before and after, cause
    momentary      each time its rule speaks is told anew
    standing       the condition is there
    seen_by        who acknowledged it since the condition last came; None while nobody has
    pending_until  end of the on-delay; until then it is "normal" and nobody is told
    held, held_until   the reason of the known change that holds its notices back, and until when
    quiet_since    since when the rule's statistic has been low
    spoken         how often the rule spoke; raised, how often it was announced as raised
    """

    id: str
    stream: str
    rule: Rule
    state: State
    raised_at: int
    raised_after_events: int
    found_at: int
    direction: Direction | None
    changed_at: int | None
    changed_between: tuple[int, int] | None
    unit: str
    measure: Measure
    before: float | None
    after: float | None
    cause: str | None
    priority: Priority
    response: str
    return_below: float
    off_delay: int
    longest_shelf: int
    momentary: bool = False
    message: str = ""
    standing: bool = True
    seen_by: str | None = None
    pending_until: int | None = None
    shelved_until: int | None = None
    wait_until: int | None = None
    held: str | None = None
    held_until: int | None = None
    quiet_since: int | None = None
    spoken: int = 1
    raised: int = 0
    decisions: tuple[Decision, ...] = ()

    @property
    def is_open(self) -> bool:
        """It still asks for something: not closed, or about to be announced."""
        return self.state != "normal" or self.pending_until is not None


class AlarmChange(msgspec.Struct, frozen=True, kw_only=True, rename={"from_state": "from", "to_state": "to"}):
    """One row of an alarm's history. `by` is None when the program acted by itself."""

    alarm: str
    at: int
    from_state: State
    to_state: State
    cause: str
    by: str | None = None
    note: str | None = None


NoticeKind = Literal["raised", "raised again", "returned", "acknowledged", "closed", "suppressed", "reminder"]


class Notice(msgspec.Struct, frozen=True, kw_only=True):
    """Something to be told about an alarm. Its id is the same however often it is made or sent."""

    id: str
    alarm: str
    kind: NoticeKind
    at: int


class AcceptChange(msgspec.Struct, frozen=True, kw_only=True, tag="accept"):
    """A new baseline is to be made of what came from `since` on; the rules of the stream start again."""

    stream: str
    since: int
    by: str
    note: str


class RestartRule(msgspec.Struct, frozen=True, kw_only=True, tag="restart"):
    """The rule gathers its evidence anew, against the same baseline."""

    stream: str
    rule: Rule


class AddKnown(msgspec.Struct, frozen=True, kw_only=True, tag="known"):
    """A known change that a person declared."""

    change: KnownChange
    by: str


class KeepOut(msgspec.Struct, frozen=True, kw_only=True, tag="keep out"):
    """The span [start, end) is left out of baselines, never out of the store."""

    stream: str
    start: int
    end: int
    by: str
    note: str


Consequence = AcceptChange | RestartRule | AddKnown | KeepOut
"""What a decision does beyond the alarm itself, for the engine to carry out."""


class Outcome(msgspec.Struct, frozen=True, kw_only=True):
    """What a stimulus did: the alarm after it, its changes, what to tell, what else follows.

    refused  why it could not be done, in a sentence; then the alarm is only what time alone made of it
    """

    alarm: Alarm
    changes: tuple[AlarmChange, ...] = ()
    notices: tuple[Notice, ...] = ()
    consequences: tuple[Consequence, ...] = ()
    refused: str | None = None


def natural_id(*parts: str | int) -> str:
    """16 hexadecimal digits that depend on the parts alone (BLAKE2b of their JSON)."""
    return blake2b(msgspec.json.encode(parts), digest_size=8).hexdigest()


def alarm_id(stream: str, rule: Rule, raised_at: int) -> str:
    """The alarm's id: the same whenever and wherever it is derived."""
    return natural_id("alarm", stream, rule, raised_at)


def notice_id(alarm: str, kind: NoticeKind, at: int, receiver: str = "") -> str:
    """The notice's id; reminders are made for one receiver."""
    return natural_id("notice", alarm, kind, at, receiver)
