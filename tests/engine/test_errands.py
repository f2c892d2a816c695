"""Errands: who is told, at which hours, what overtakes what, and who is reminded."""

from __future__ import annotations

import msgspec

from monitor.alarms.alarm import Notice
from monitor.alarms.machine import raise_alarm
from monitor.alarms.priorities import HOUR, MINUTE
from monitor.engine.errands import errands_for, overtaken, reminders
from monitor.plan.receivers import CommandWay, Hours, Receiver
from storage.errands import ErrandStood
from tests.alarms.examples import SPOKE, T0, alarm_in, policy


def person(
    name: str, *, rule: str = "exponent", repeat_after: int | None = None, from_hour: int | None = None
) -> Receiver:
    hours = None
    if from_hour is not None:
        hours = Hours(days=tuple(range(7)), start=60 * from_hour, end=60 * from_hour + 60, timezone="UTC")
    return Receiver(
        name=name, way=CommandWay(("x",)), streams=("north-*",), rules=(rule,), hours=hours,
        repeat_after=repeat_after, false_alarm_every=None, timeout=1,
    )  # fmt: skip


AT_16 = T0 + 106 * MINUTE + 40 * 1_000_000_000
"""Four o'clock UTC on the day of T0, 14:13:20."""
RAISED = raise_alarm(SPOKE, policy())


def test_each_receiver_that_wants_it_has_an_errand_at_its_hours() -> None:
    people = [person("a"), person("b", rule="fit"), person("c", from_hour=16)]
    found = errands_for(RAISED.notices[0], RAISED.alarm, people, T0 + MINUTE)
    assert [(one.receiver, one.due, one.at) for one in found] == [("a", T0 + MINUTE, T0), ("c", AT_16, T0)]


def errand(notice: str, receiver: str = "a", **changes: object) -> ErrandStood:
    made = ErrandStood(notice=notice, alarm=RAISED.alarm.id, receiver=receiver, at=T0, due=T0 + HOUR, known_at=T0)
    return msgspec.structs.replace(made, **changes)


def test_only_what_waits_for_the_hours_is_overtaken() -> None:
    waiting = [
        errand("night"),
        errand("other receiver", receiver="b"),
        errand("other alarm", alarm="x"),
        errand("failing", tries=1),
        errand("on its way", due=T0),
        errand("new"),
        errand("ended", state="delivered"),
    ]
    found = overtaken(waiting, [errand("new")], T0 + MINUTE)
    assert [(one.notice, one.state, one.ended_at) for one in found] == [("night", "overtaken", T0 + MINUTE)]


def test_who_was_reached_and_has_not_acknowledged_is_reminded_within_hours() -> None:
    alarm = alarm_in("unacknowledged")
    people = [
        person("a", repeat_after=HOUR),
        person("never"),
        person("unreached", repeat_after=HOUR),
        person("asleep", repeat_after=HOUR, from_hour=22),
        person("other", rule="fit", repeat_after=HOUR),
    ]
    told = {(alarm.id, name): T0 for name in ("a", "never", "asleep", "other")}
    assert reminders([alarm], people, told, T0 + HOUR - 1) == ()
    found = reminders([alarm, alarm_in("acknowledged")], people, told, T0 + HOUR + MINUTE)
    assert [(one.errand.receiver, one.notice.kind, one.errand.due) for one in found] == [
        ("a", "reminder", T0 + HOUR + MINUTE)
    ]
    assert isinstance(found[0].notice, Notice)
    assert found[0].notice.id == found[0].errand.notice
    later = {**told, (alarm.id, "a"): T0 + HOUR + MINUTE}
    assert reminders([alarm], people, later, T0 + 2 * HOUR) == ()
