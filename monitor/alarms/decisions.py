"""What a person concludes from an alarm, and what follows from it beyond the alarm itself."""

from __future__ import annotations

import re

from monitor.alarms.alarm import AcceptChange, AddKnown, Alarm, Consequence, Decision, KeepOut, RestartRule
from monitor.alarms.known import KnownChange
from monitor.alarms.states import Choice
from monitor.alarms.stimuli import Decide

MEANINGS: dict[Choice, str] = {
    "accept": "the change is the new normal: a new baseline is made of what came after it, and the alarm is closed",
    "wait": "it is too early to tell: the alarm counts as acknowledged and is announced again when the time is over",
    "one-off": "it happened once and is over: the baseline stays, the rule starts again, and the alarm is closed",
    "planned": "it was planned: kept out of baselines, further notices held until its end, and announced again if it"
    " then still stands",
    "data-fault": "the data is at fault: kept out of baselines, never out of the store",
}
"""What each choice does, for people to read before they choose."""


def objection(stimulus: Decide, t: int) -> str | None:
    """Why the choice is not complete, or None."""
    if not stimulus.by.strip():
        return "a decision needs the name of who takes it"
    if stimulus.choice == "wait":
        if stimulus.until is None:
            return "waiting needs an end"
        if stimulus.until <= t:
            return "the end of waiting has passed already"
    if stimulus.choice == "planned" and not stimulus.note.strip():
        return "a planned change needs a reason, for it is shown everywhere"
    return None


def decision(alarm: Alarm, stimulus: Decide, t: int) -> Decision:
    """The record of the decision, with the figures it was taken on."""
    return Decision(
        choice=stimulus.choice, at=t, by=stimulus.by, note=stimulus.note, unit=alarm.unit, before=alarm.before,
        after=alarm.after, tail_events=stimulus.tail_events,
    )  # fmt: skip


def consequences(alarm: Alarm, stimulus: Decide, t: int) -> list[Consequence]:
    """What the engine has to carry out.

    What is kept out of baselines begins with the earliest moment the change may have happened; a new baseline begins
    with the latest, so that neither holds a mixture of before and after.
    """
    earliest, latest = alarm.changed_between or (alarm.changed_at or alarm.raised_at,) * 2
    end = stimulus.until if stimulus.until is not None else t
    match stimulus.choice:
        case "accept":
            return [AcceptChange(stream=alarm.stream, since=latest, by=stimulus.by, note=stimulus.note)]
        case "one-off":
            return [RestartRule(stream=alarm.stream, rule=alarm.rule)]
        case "planned" if end > earliest:
            return _planned(alarm, stimulus, earliest, end, t)
        case "data-fault" if end > earliest:
            kept_out = KeepOut(stream=alarm.stream, start=earliest, end=end, by=stimulus.by, note=stimulus.note)
            return [kept_out]
    return []


def _planned(alarm: Alarm, stimulus: Decide, earliest: int, end: int, t: int) -> list[Consequence]:
    pattern = only_this(alarm.stream)
    out: list[Consequence] = [
        AddKnown(
            change=KnownChange(
                start=earliest, end=end, streams=pattern, reason=stimulus.note, effect="not in baseline"
            ),
            by=stimulus.by,
        )
    ]
    if end > t:
        holding = KnownChange(start=t, end=end, streams=pattern, reason=stimulus.note, effect="hold notices")
        out.append(AddKnown(change=holding, by=stimulus.by))
    return out


def only_this(stream: str) -> str:
    """The pattern that matches this stream's name and no other."""
    return re.sub(r"([*?[])", r"[\1]", stream)
