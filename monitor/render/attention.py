"""What asks for a person's look, in order: alarms not acknowledged, then the rest; flags of refits last, and quietly.

An alarm comes with a promise of how seldom it is false; a flag is judged refit by refit and cries wolf. So a flag that
an open alarm tells already is not told again, and one without an alarm never counts as something that needs a look.
"""

from __future__ import annotations

from collections.abc import Iterable

import msgspec

from monitor.alarms.alarm import Alarm
from monitor.alarms.priorities import PRIORITIES, Rule
from monitor.alarms.states import ACKNOWLEDGED, OUT_OF_SERVICE, RETURNED, SHELVED, UNACKNOWLEDGED
from monitor.render.seen import Seen, StreamSeen
from monitor.render.words.findings import Finding, Kind, findings

_TELLS: dict[Kind, tuple[Rule, ...]] = {
    "heavier": ("exponent", "tail share"),
    "lighter": ("exponent", "tail share"),
    "fit": ("fit", "rival"),
    "limit": ("level",),
}
"""The rules whose alarms tell what a refit's flag tells."""


class Sorted(msgspec.Struct, frozen=True, kw_only=True):
    """A stream with what is told of it: open alarms that are not suppressed, and findings that no alarm tells."""

    stream: StreamSeen
    alarms: tuple[Alarm, ...] = ()
    findings: tuple[Finding, ...] = ()

    @property
    def faults(self) -> tuple[Finding, ...]:
        """Findings that are no judgements: a refit that gave no result."""
        return tuple(one for one in self.findings if not one.refits)

    @property
    def flags(self) -> tuple[Finding, ...]:
        """Findings judged refit by refit."""
        return tuple(one for one in self.findings if one.refits)

    @property
    def needs_a_look(self) -> bool:
        """Whether somebody has to see something: an alarm that nobody acknowledged, or a refit without a result."""
        return bool(self.faults) or any(is_new(alarm) for alarm in self.alarms)

    @property
    def rank(self) -> tuple[object, ...]:
        """Place in the order of the screen; smaller is more pressing."""
        if self.alarms:
            first = urgency(self.alarms[0])
            return (0 if self.needs_a_look else 2, *first)
        kinds = [one.rank for one in self.faults or self.flags]
        return (1 if self.faults else 3 if kinds else 4, *kinds[:1])


def is_new(alarm: Alarm) -> bool:
    """Nobody has acknowledged it, and no known change explains it."""
    return alarm.state in (UNACKNOWLEDGED, RETURNED) and alarm.held is None


def is_suppressed(alarm: Alarm) -> bool:
    """Shelved, out of service, or still within its on-delay: counted, not told."""
    return alarm.state in (SHELVED, OUT_OF_SERVICE) or alarm.pending_until is not None


def urgency(alarm: Alarm) -> tuple[int, int, int]:
    """The order of alarms: not acknowledged before gone, held and acknowledged ones; then by priority, newest first."""
    turn = 2 if alarm.held is not None else {UNACKNOWLEDGED: 0, RETURNED: 1, ACKNOWLEDGED: 3}.get(alarm.state, 4)
    return turn, PRIORITIES.index(alarm.priority), -alarm.raised_at


def told_alarms(alarms: Iterable[Alarm]) -> tuple[Alarm, ...]:
    """Those that are told, the most pressing first."""
    return tuple(sorted((one for one in alarms if not is_suppressed(one)), key=urgency))


def telling_alarm(finding: Finding, alarms: Iterable[Alarm]) -> Alarm | None:
    """The open alarm that tells what the finding tells, suppressed or not; None when none does."""
    for alarm in alarms:
        same_way = finding.kind not in ("heavier", "lighter") or alarm.direction in (None, finding.kind)
        if alarm.rule in _TELLS.get(finding.kind, ()) and same_way:
            return alarm
    return None


def sorted_stream(stream: StreamSeen, zone: str, now: int) -> Sorted:
    """What is told of one stream."""
    found = findings(stream, zone, now)
    untold = tuple(one for one in found if telling_alarm(one, stream.alarms) is None)
    return Sorted(stream=stream, alarms=told_alarms(stream.alarms), findings=untold)


def in_order(seen: Seen, now: int) -> list[Sorted]:
    """Streams in the order of the screen: the most pressing first, then by name."""
    found = [sorted_stream(stream, seen.plan.timezone, now) for stream in seen.streams]
    return sorted(found, key=lambda one: (one.rank, one.stream.name))


def to_acknowledge(stream: StreamSeen) -> Alarm | None:
    """The stream's most pressing alarm that can be acknowledged; None when there is none."""
    return next((one for one in told_alarms(stream.alarms) if one.state in (UNACKNOWLEDGED, RETURNED)), None)
