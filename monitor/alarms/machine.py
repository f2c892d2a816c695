"""What becomes of an alarm when something happens to it: pure, and never an exception for what people ask.

`raise_alarm` makes an alarm of what a rule said; `step` lets one thing happen to it. Both first let everything happen
that time alone has brought since (delays, shelves, waits and holds that are over), at its own moment, so that the
outcome does not depend on how often the clock was looked at.

An alarm is never acknowledged but by a person, and never hidden: a known change only holds its notices back.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, field
from typing import Any

import msgspec

from monitor.alarms import decisions
from monitor.alarms.alarm import (
    Alarm,
    AlarmChange,
    Consequence,
    Notice,
    NoticeKind,
    Outcome,
    Spoke,
    alarm_id,
    notice_id,
)
from monitor.alarms.known import KnownChange, hold
from monitor.alarms.priorities import Policy
from monitor.alarms.states import (
    ACKNOWLEDGED,
    GONE_ALREADY,
    NORMAL,
    OUT_OF_SERVICE,
    RETURNED,
    SHELVED,
    UNACKNOWLEDGED,
    Event,
    find_move,
    refusal,
)
from monitor.alarms.stimuli import (
    Acknowledge,
    Cleared,
    Decide,
    Measured,
    Note,
    Remove,
    Restore,
    Shelve,
    Speaks,
    Stimulus,
    Ticked,
    Unshelve,
)


def raise_alarm(spoke: Spoke, policy: Policy, known: Sequence[KnownChange] = ()) -> Outcome:
    """A new alarm of what a rule said, for a stream and rule without an open alarm.

    With an on-delay it starts as normal and pending, and is announced when that is over.
    """
    alarm = Alarm(
        id=alarm_id(spoke.stream, spoke.rule, spoke.at),
        stream=spoke.stream,
        rule=spoke.rule,
        state=NORMAL,
        raised_at=spoke.at,
        raised_after_events=spoke.events,
        priority=policy.priority,
        response=policy.response,
        return_below=policy.return_below,
        off_delay=policy.off_delay,
        longest_shelf=policy.longest_shelf,
        momentary=policy.momentary,
        pending_until=spoke.at + policy.on_delay,
        **_finding(spoke),
    )
    run = _Run(alarm, known)
    run.pass_time(spoke.at)
    return run.outcome()


def step(alarm: Alarm, stimulus: Stimulus, t: int, known: Sequence[KnownChange] = ()) -> Outcome:
    """Let one thing happen to an alarm at the moment t (ns).

    What a person asks for but cannot be comes back in `Outcome.refused`, as the end of a sentence. An alarm that is
    equal to the one given need not be stored again.
    """
    run = _Run(alarm, known)
    run.pass_time(t)
    match stimulus:
        case Ticked():
            pass
        case Speaks():
            _speaks(run, stimulus.spoke)
        case Measured():
            _measured(run, stimulus.share, t)
        case Cleared():
            _clears(run, t)
        case Note():
            _note(run, stimulus, t)
        case Decide():
            _decide(run, stimulus, t)
        case _:
            _operator(run, stimulus, t)
    return run.outcome()


def reminder(alarm: Alarm, receiver: str, last_told: int, repeat_after: int, t: int) -> Notice | None:
    """The reminder that is due to a receiver at t, or None.

    Only what stands, is announced and acknowledged by nobody is told again; its moment is the one it was due at.
    """
    due = last_told + repeat_after
    if alarm.state != UNACKNOWLEDGED or alarm.held is not None or t < due:
        return None
    due += (t - due) // repeat_after * repeat_after  # after a stop of the daemon: once, not once for each missed
    return Notice(id=notice_id(alarm.id, "reminder", due, receiver), alarm=alarm.id, kind="reminder", at=due)


@dataclass(slots=True)
class _Run:
    """An outcome in the making."""

    alarm: Alarm
    known: Sequence[KnownChange]
    changes: list[AlarmChange] = field(default_factory=list)
    notices: list[Notice] = field(default_factory=list)
    consequences: list[Consequence] = field(default_factory=list)
    refused: str | None = None

    def outcome(self) -> Outcome:
        return Outcome(
            alarm=self.alarm,
            changes=tuple(self.changes),
            notices=tuple(self.notices),
            consequences=tuple(self.consequences),
            refused=self.refused,
        )

    def set(self, **fields: object) -> None:
        self.alarm = msgspec.structs.replace(self.alarm, **fields)

    def refuse(self, why: str) -> None:
        self.refused = why

    def move(self, event: Event, t: int, *, by: str | None = None, note: str | None = None) -> bool:
        """Make the move of an event and write it down; False, with the reason in `refused`, when there is none."""
        before = self.alarm
        found = find_move(before.state, event, stands=before.standing, seen=before.seen_by is not None)
        if found is None:
            self.refuse(refusal(before.state, event))
            return False
        self.set(state=found.to, **_leaving(before, found.to))
        if found.to == ACKNOWLEDGED and by is not None:
            self.set(seen_by=by)
        self.changes.append(
            AlarmChange(
                alarm=before.id, at=t, from_state=before.state, to_state=found.to, cause=found.cause, by=by, note=note
            )
        )
        self._tell(before, event, t)
        return True

    def _tell(self, before: Alarm, event: Event, t: int) -> None:
        after = self.alarm
        if after.state == UNACKNOWLEDGED and (before.state != UNACKNOWLEDGED or event in ("turns", "recurs")):
            # Whatever is announced anew is to be acknowledged anew.
            self.set(seen_by=None)
            self.announce(t)
        elif after.state != before.state and after.raised:
            kinds: dict[str, NoticeKind] = {
                NORMAL: "closed", ACKNOWLEDGED: "acknowledged", RETURNED: "returned", SHELVED: "suppressed",
                OUT_OF_SERVICE: "suppressed",
            }  # fmt: skip
            self.tell(kinds[after.state], t)

    def announce(self, t: int) -> None:
        """Tell that it is raised, unless a known change holds that back: then mark it as held."""
        holding = hold(self.known, self.alarm.stream, t)
        if holding is not None:
            self.set(held=holding.reason, held_until=holding.end)
            return
        self.tell("raised again" if self.alarm.raised else "raised", t)
        self.set(held=None, held_until=None, raised=self.alarm.raised + 1)

    def tell(self, kind: NoticeKind, t: int) -> None:
        alarm = self.alarm.id
        self.notices.append(Notice(id=notice_id(alarm, kind, t), alarm=alarm, kind=kind, at=t))

    def pass_time(self, t: int) -> None:
        """Everything that was due up to t, in its order, each at its own moment."""
        while (due := _next_due(self.alarm)) is not None and due <= t:
            alarm = self.alarm
            if alarm.pending_until == due:
                self.set(pending_until=None)
                self.move("on-delay over", due)
            elif alarm.shelved_until == due:
                self.move("shelf over", due)
            elif alarm.wait_until == due:
                self.set(wait_until=None)
                self.move("wait over", due)
            else:  # only an unacknowledged alarm is held
                self.set(held=None, held_until=None)
                self.announce(due)


def _next_due(alarm: Alarm) -> int | None:
    moments = (alarm.pending_until, alarm.shelved_until, alarm.wait_until, alarm.held_until)
    return min((moment for moment in moments if moment is not None), default=None)


def _leaving(before: Alarm, to: str) -> dict[str, object]:
    """Fields that lose their meaning with the state that is left."""
    out: dict[str, object] = {}
    if to != SHELVED:
        out["shelved_until"] = None
    if to != ACKNOWLEDGED:
        out["wait_until"] = None
    if to not in (NORMAL, UNACKNOWLEDGED) or before.state != to:
        out["pending_until"] = None
    if to != UNACKNOWLEDGED:
        out["held"] = out["held_until"] = None
    return out


def _finding(spoke: Spoke) -> dict[str, Any]:
    return {
        "found_at": spoke.at, "direction": spoke.direction, "changed_at": spoke.changed_at,
        "changed_between": spoke.changed_between,
        "unit": spoke.unit, "measure": spoke.measure, "before": spoke.before, "after": spoke.after,
        "cause": spoke.cause,
    }  # fmt: skip


def _speaks(run: _Run, spoke: Spoke) -> None:
    """The rule speaks again. A condition that came back has not been seen; one that turned is another condition;
    one that lasts for a moment only is another one each time.
    """
    alarm = run.alarm
    if alarm.pending_until is not None:
        run.set(spoken=alarm.spoken + 1, quiet_since=None, **_finding(spoke))
        return
    turned = spoke.direction is not None and alarm.direction is not None and spoke.direction != alarm.direction
    if alarm.state == NORMAL:
        run.refuse(refusal(NORMAL, "speaks"))
        return
    anew = turned or alarm.momentary or not alarm.standing
    run.set(standing=True, spoken=alarm.spoken + 1, quiet_since=None, seen_by=None if anew else alarm.seen_by)
    if anew:
        run.set(**_finding(spoke))
    run.move("recurs" if alarm.momentary else "turns" if turned else "speaks", spoke.at)


def _measured(run: _Run, share: float, t: int) -> None:
    """Low for the whole off-delay: gone. High again before that: it had not gone."""
    alarm = run.alarm
    if not alarm.standing:
        return
    if share >= alarm.return_below:
        run.set(quiet_since=None)
    elif alarm.quiet_since is None:
        run.set(quiet_since=t)
    elif t - alarm.quiet_since >= alarm.off_delay:
        _clears(run, t)


def _clears(run: _Run, t: int) -> None:
    if not run.alarm.standing:
        run.refuse(GONE_ALREADY)
        return
    run.set(standing=False, quiet_since=None, pending_until=None)
    run.move("clears", t)


def _note(run: _Run, stimulus: Note, t: int) -> None:
    alarm = run.alarm
    if not stimulus.by.strip() or not stimulus.text.strip():
        run.refuse("a note needs its words and who writes them")
        return
    run.changes.append(
        AlarmChange(
            alarm=alarm.id, at=t, from_state=alarm.state, to_state=alarm.state, cause="note", by=stimulus.by,
            note=stimulus.text,
        )
    )  # fmt: skip


def _operator(run: _Run, stimulus: Acknowledge | Shelve | Unshelve | Remove | Restore, t: int) -> None:
    if not stimulus.by.strip():
        run.refuse("an act needs the name of who does it")
        return
    if run.alarm.pending_until is not None and not isinstance(stimulus, Remove):
        run.refuse("it is not announced yet: its on-delay is running")
        return
    match stimulus:
        case Acknowledge():
            run.move("acknowledge", t, by=stimulus.by, note=stimulus.note)
        case Shelve():
            _shelve(run, stimulus, t)
        case Unshelve():
            run.move("unshelve", t, by=stimulus.by, note=stimulus.note)
        case Remove():
            if stimulus.note.strip():
                run.move("remove", t, by=stimulus.by, note=stimulus.note)
            else:
                run.refuse("taking an alarm out of service needs a reason")
        case Restore():
            run.move("restore", t, by=stimulus.by, note=stimulus.note)


def _shelve(run: _Run, stimulus: Shelve, t: int) -> None:
    if stimulus.until <= t:
        run.refuse("the end of shelving has passed already")
    elif stimulus.until - t > run.alarm.longest_shelf:
        days = run.alarm.longest_shelf / 86_400_000_000_000
        run.refuse(f"it can be shelved for {days:g} days at most; take it out of service if it has to be longer")
    elif run.move("shelve", t, by=stimulus.by, note=stimulus.note):
        run.set(shelved_until=stimulus.until)


def _decide(run: _Run, stimulus: Decide, t: int) -> None:
    why = decisions.objection(stimulus, t) or (
        "it is not announced yet: its on-delay is running" if run.alarm.pending_until is not None else None
    )
    if why is not None:
        run.refuse(why)
        return
    alarm = run.alarm
    if not run.move(stimulus.choice, t, by=stimulus.by, note=stimulus.note or None):
        return
    run.set(decisions=(*alarm.decisions, decisions.decision(alarm, stimulus, t)))
    if run.alarm.state == NORMAL:
        run.set(standing=False, seen_by=stimulus.by, quiet_since=None)
    elif stimulus.until is not None and stimulus.until > t:
        run.set(wait_until=stimulus.until)
    run.consequences += decisions.consequences(alarm, stimulus, t)
