"""Alarms in the engine: rules that speak raise them, readings let them go, people act on them.

The machine itself is monitor.alarms; here its inputs are made of what the watch says, and its outcomes become facts.
"""

from __future__ import annotations

from collections.abc import Mapping
from math import exp
from typing import Literal

import msgspec

from monitor.alarms.alarm import (
    AcceptChange,
    AddKnown,
    Alarm,
    AlarmChange,
    Consequence,
    KeepOut,
    Measure,
    Notice,
    Outcome,
    RestartRule,
    Spoke,
)
from monitor.alarms.decisions import only_this
from monitor.alarms.known import KnownChange
from monitor.alarms.machine import raise_alarm, step
from monitor.alarms.states import Choice
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
from monitor.engine.errands import errands_for, reminders
from monitor.engine.natural import natural_id
from monitor.engine.state import Posted, State
from monitor.engine.watching import Told, Watched
from monitor.plan import StreamPlan
from monitor.render.alarm_documents import notice_data
from monitor.render.words.alarm import PlanFacts, alarm_message
from monitor.watch.rules import Detector, Watch
from storage.facts import (
    AlarmMoved,
    AlarmStood,
    ChangeAccepted,
    Fact,
    KnownAdded,
    NoteWritten,
    NoticeQueued,
    RequestAnswered,
    WatchStood,
)

ActName = Literal["acknowledge", "shelve", "unshelve", "out-of-service", "in-service", "note", "decide"]


class Act(msgspec.Struct, frozen=True, kw_only=True):
    """What a person asks for. `until` is a moment in ns; `at`, of a note without an alarm, likewise."""

    act: ActName
    by: str
    alarm: str | None = None
    note: str = ""
    until: int | None = None
    at: int | None = None
    choice: Choice | None = None
    tail_events: int | None = None


def known_of(state: State) -> tuple[KnownChange, ...]:
    """The known changes of the settings, of calendars and of people."""
    return (*state.plan.known, *state.declared)


def heed(state: State, stream: str, found: Watched, now: int) -> list[Fact]:
    """What new slots of a watch mean for the alarms of their stream."""
    facts: list[Fact] = []
    known = known_of(state)
    for told in found.told:
        spoke = _spoke(state, state.watches[stream], told)
        held = state.alarms.get((stream, spoke.rule))
        if held is None:
            outcome = _worded(state, raise_alarm(spoke, state.plan.policies[spoke.rule], known))
        else:
            outcome = _worded(state, step(held, Speaks(spoke=spoke), spoke.at, known))
        facts += _taken(state, held, outcome, now)
    spoken = {told.spoken.rule for told in found.told}
    for reading in found.readings:
        held = state.alarms.get((stream, reading.rule))
        if held is not None and reading.rule not in spoken:
            share = 0.0
            if reading.ln_statistic is not None:
                share = exp(min(0.0, reading.ln_statistic - reading.ln_threshold))
            facts += _taken(state, held, step(held, Measured(share=share), reading.at_ns, known), now)
    return facts


def queued(state: State, notice: Notice, alarm: Alarm, changes: tuple[AlarmChange, ...], now: int) -> list[Fact]:
    """A notice with what will be sent, and its errands to those who want to hear of it."""
    data = msgspec.json.encode(notice_data(notice, alarm, changes, _plan_facts(state, alarm))).decode()
    facts: list[Fact] = [
        NoticeQueued(
            id=notice.id, alarm=notice.alarm, stream=alarm.stream, kind=notice.kind, at=notice.at, data=data,
            known_at=now,
        )
    ]  # fmt: skip
    return facts + list(errands_for(notice, alarm, state.plan.receivers, now))


def _plan_facts(state: State, alarm: Alarm) -> PlanFacts:
    plan = state.plan.stream(alarm.stream, state.streams[alarm.stream].unit)
    held = state.baselines.get(alarm.stream)
    return PlanFacts(
        timezone=state.plan.timezone, unit=plan.unit, one_in=plan.one_in[-1], limit=plan.limit,
        planned=held is not None and held.source == "plan",
    )  # fmt: skip


def _worded(state: State, outcome: Outcome) -> Outcome:
    """The outcome with the alarm's message, made of what is known when the rule speaks."""
    alarm = outcome.alarm
    worded = msgspec.structs.replace(alarm, message=alarm_message(alarm, _plan_facts(state, alarm)))
    return msgspec.structs.replace(outcome, alarm=worded)


def remind(state: State, told: Mapping[tuple[str, str], int], now: int) -> list[Fact]:
    """Reminders that are due. told: (alarm, receiver) -> when it was last delivered; pairs on their way left out."""
    facts: list[Fact] = []
    for due in reminders(state.alarms.values(), state.plan.receivers, told, now):
        alarm = next(one for one in state.alarms.values() if one.id == due.notice.alarm)
        data = msgspec.json.encode(notice_data(due.notice, alarm, (), _plan_facts(state, alarm))).decode()
        facts.append(
            NoticeQueued(
                id=due.notice.id, alarm=alarm.id, stream=alarm.stream, kind=due.notice.kind, at=due.notice.at,
                data=data, known_at=now,
            )
        )  # fmt: skip
        facts.append(due.errand)
    return facts


def pass_time(state: State, now: int) -> list[Fact]:
    """Delays, shelves and holds that are over by now."""
    known = known_of(state)
    facts: list[Fact] = []
    for held in list(state.alarms.values()):
        outcome = step(held, Ticked(), now, known)
        if outcome.alarm != held:
            facts += _taken(state, held, outcome, now)
    return facts


def asked(state: State, request: str, act: Act, closed: Alarm | None, now: int) -> list[Fact]:
    """Carry out what a person asks for, or say why not; the answer is a fact beside what it did.

    Parameters: closed, the alarm as the store holds it, for acts on one that is no longer open.
    """
    if act.act == "note" and act.alarm is None:
        note = NoteWritten(id=request, at=act.at if act.at is not None else now, by=act.by, text=act.note, known_at=now)
        return [note, RequestAnswered(id=request, done=True, answer="noted", known_at=now)]
    held = next((alarm for alarm in state.alarms.values() if alarm.id == act.alarm), closed)
    if held is None:
        answer = "there is no such alarm"
        return [RequestAnswered(id=request, done=False, answer=answer, known_at=now)]
    outcome = step(held, _stimulus(act, now), now, known_of(state))
    facts = _taken(state, held, outcome, now)
    answer = outcome.refused or f"{outcome.alarm.state}"
    return [*facts, RequestAnswered(id=request, done=outcome.refused is None, answer=answer, known_at=now)]


def _stimulus(act: Act, now: int) -> Stimulus:
    match act.act:
        case "acknowledge":
            return Acknowledge(by=act.by, note=act.note or None)
        case "shelve":
            return Shelve(by=act.by, until=act.until if act.until is not None else now, note=act.note or None)
        case "unshelve":
            return Unshelve(by=act.by, note=act.note or None)
        case "out-of-service":
            return Remove(by=act.by, note=act.note)
        case "in-service":
            return Restore(by=act.by, note=act.note or None)
        case "note":
            return Note(by=act.by, text=act.note)
        case "decide":
            assert act.choice is not None, "the command line asks for the choice"
            return Decide(by=act.by, choice=act.choice, note=act.note, until=act.until, tail_events=act.tail_events)


def _taken(state: State, before: Alarm | None, outcome: Outcome, now: int) -> list[Fact]:
    """The outcome as facts; the state follows it."""
    alarm = outcome.alarm
    key = (alarm.stream, alarm.rule)
    other = state.alarms.get(key)
    if other is None or other.id == alarm.id:  # an act on a closed alarm leaves a newer open one alone
        if alarm.is_open:
            state.alarms[key] = alarm
        else:
            state.alarms.pop(key, None)
    posted = state.watches.get(alarm.stream)
    if posted is not None:
        standing = tuple(
            rule for stream, rule in state.alarms if stream == alarm.stream and state.alarms[stream, rule].standing
        )
        state.watches[alarm.stream] = msgspec.structs.replace(posted, holding=standing)
    if alarm == before and not outcome.changes:
        return []
    facts: list[Fact] = [
        AlarmStood(
            id=alarm.id, stream=alarm.stream, rule=alarm.rule, state=alarm.state, raised_at=alarm.raised_at,
            open=alarm.is_open, alarm=msgspec.json.encode(alarm).decode(), known_at=now,
        )
    ]  # fmt: skip
    facts += [
        AlarmMoved(
            id=natural_id("move", *msgspec.structs.astuple(change)), alarm=change.alarm, at=change.at,
            from_state=change.from_state, to_state=change.to_state,
            cause=change.cause, by=change.by, note=change.note, known_at=now,
        )
        for change in outcome.changes
    ]  # fmt: skip
    for notice in outcome.notices:
        facts += queued(state, notice, alarm, outcome.changes, now)
    for consequence in outcome.consequences:
        facts += _carried_out(state, alarm.id, consequence, now)
    return facts


def _carried_out(state: State, alarm: str, consequence: Consequence, now: int) -> list[Fact]:
    """What a decision does beyond its alarm."""
    match consequence:
        case AcceptChange():
            state.since[consequence.stream] = consequence.since
            state.baselines.pop(consequence.stream, None)
            state.watches.pop(consequence.stream, None)
            accepted = ChangeAccepted(
                id=natural_id("accepted", alarm), stream=consequence.stream, since=consequence.since,
                by=consequence.by, note=consequence.note, known_at=now,
            )  # fmt: skip
            return [accepted, *_let_go(state, consequence.stream, now)]
        case RestartRule():
            return _restarted(state, consequence.stream, consequence.rule)
        case AddKnown():
            return [_declared(state, consequence.change, consequence.by, now)]
        case KeepOut():
            change = KnownChange(
                start=consequence.start, end=consequence.end, streams=only_this(consequence.stream),
                reason=consequence.note or "data at fault", effect="not in baseline",
            )  # fmt: skip
            return [_declared(state, change, consequence.by, now)]


def _let_go(state: State, stream: str, now: int) -> list[Fact]:
    """The stream's other alarms compare with what no longer counts: their conditions are gone with it."""
    facts: list[Fact] = []
    for held in [alarm for alarm in state.alarms.values() if alarm.stream == stream and alarm.standing]:
        facts += _taken(state, held, step(held, Cleared(), now, known_of(state)), now)
    return facts


def _declared(state: State, change: KnownChange, by: str, now: int) -> KnownAdded:
    state.declared.append(change)
    return KnownAdded(
        id=natural_id("known", *msgspec.structs.astuple(change)), start=change.start, end=change.end,
        streams=change.streams, reason=change.reason, effect=change.effect, by=by, known_at=now,
    )  # fmt: skip


def _restarted(state: State, stream: str, rule: str) -> list[Fact]:
    """The rule gathers its evidence anew, against the same baseline."""
    posted = state.watches.get(stream)
    if posted is None:
        return []
    fresh = tuple(
        Detector((), posted.state.at_ns) if ruled.rule == rule else held
        for ruled, held in zip(posted.watch.rules, posted.state.detectors, strict=True)
    )
    after = msgspec.structs.replace(posted.state, detectors=fresh)
    state.watches[stream] = msgspec.structs.replace(posted, state=after)
    return [
        WatchStood(
            stream=stream, watch=posted.id, at=after.at_ns, state=msgspec.json.encode(after).decode(), readings="[]"
        )
    ]


def _spoke(state: State, posted: Posted, told: Told) -> Spoke:
    """What a rule said, in units: before and after, as far as they can be told."""
    spoken, change = told.spoken, told.change
    stream = state.streams[spoken.stream]
    plan = state.plan.stream(spoken.stream, stream.unit)
    measure, unit, before, after = _before_and_after(posted, told, plan, stream.unit)
    return Spoke(
        stream=spoken.stream,
        rule=spoken.rule,
        at=spoken.at_ns,
        events=spoken.events,
        direction=spoken.direction,
        changed_at=change.at_ns if change else None,
        changed_between=(change.from_ns, change.to_ns) if change else None,
        unit=unit,
        measure=measure,
        before=before,
        after=after,
        cause=spoken.cause,
    )


def _before_and_after(
    posted: Posted, told: Told, plan: StreamPlan, unit: str
) -> tuple[Measure, str, float | None, float | None]:
    """(measure, unit, before, after): the level for the exponent, the share, or the size that was seen."""
    spoken, change, base = told.spoken, told.change, posted.watch.baseline
    if spoken.rule == "exponent" and change is not None and base.alpha is not None and change.after > 0:
        share = base.share or (spoken.exceedances / spoken.events if spoken.events else None)
        before = _level(posted.watch, plan, base.alpha, share)
        return "level", unit, before, _level(posted.watch, plan, 1.0 + 1.0 / change.after, share)
    if spoken.rule == "tail share" and change is not None:
        shares = [1.0 / (gap + 0.5) for gap in (change.before, change.after)]
        if base.exchanged:
            shares = [1.0 - share for share in shares]
        return "share", "", shares[0], shares[1]
    if spoken.rule in ("level", "single event"):
        return "size", unit, posted.watch.baseline.yardstick.passage, spoken.largest
    return "none", "", None, None


def _level(watch: Watch, plan: StreamPlan, alpha: float, share: float | None) -> float | None:
    """The size passed once in one_in events by a power law from the watch's xmin on; None below it."""
    above = (share or 0.0) * plan.one_in[-1]
    return watch.baseline.yardstick.xmin * above ** (1.0 / (alpha - 1.0)) if above >= 1.0 else None
