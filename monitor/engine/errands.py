"""Errands: each notice has to reach each of its receivers once, at their hours; who is reminded when.

An errand is made in the same commit as its notice and ends as delivered, given up or overtaken, each a stored fact.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping

import msgspec

from monitor.alarms.alarm import Alarm, Notice
from monitor.alarms.machine import reminder
from monitor.plan.receivers import Receiver
from storage.errands import ErrandStood


def errands_for(notice: Notice, alarm: Alarm, receivers: Iterable[Receiver], now: int) -> tuple[ErrandStood, ...]:
    """The errands of a notice: one for each receiver that wants to hear of the alarm's stream and rule."""
    return tuple(
        ErrandStood(
            notice=notice.id, alarm=alarm.id, receiver=one.name, at=notice.at, due=one.due(now), known_at=now
        )
        for one in receivers
        if one.wants(alarm.stream, alarm.rule)
    )  # fmt: skip


def overtaken(
    waiting: Iterable[ErrandStood], new: Iterable[ErrandStood], now: int
) -> tuple[ErrandStood, ...]:  # fmt: skip
    """The waiting errands that newer ones make pointless, ended.

    Only what waits for its receiver's hours and was never tried: in the morning the newest word on an alarm is told,
    not the story of the night. What a receiver failed to take stays, in its order.
    """
    newer = {(one.alarm, one.receiver): one for one in new}
    out = []
    for one in waiting:
        by = newer.get((one.alarm, one.receiver))
        if by is not None and by.notice != one.notice and one.state == "waiting" and not one.tries and one.due > now:
            detail = "a newer notice of the same alarm came before the receiver's hours"
            out.append(msgspec.structs.replace(one, state="overtaken", ended_at=now, detail=detail, known_at=now))
    return tuple(out)


class Reminder(msgspec.Struct, frozen=True, kw_only=True):
    """A reminder to one receiver: its notice and its errand."""

    notice: Notice
    errand: ErrandStood


def reminders(
    alarms: Iterable[Alarm], receivers: Iterable[Receiver], told: Mapping[tuple[str, str], int], now: int
) -> tuple[Reminder, ...]:
    """The reminders that are due.

    Parameters: alarms, the open ones; told, for (alarm, receiver) when the last errand was delivered (ns). Leave out
    pairs with an errand that still waits: who has not been reached yet is not reminded.
    """
    listening = [(one, one.repeat_after) for one in receivers if one.repeat_after is not None]
    out = []
    for alarm in alarms:
        for one, repeat_after in listening:
            last = told.get((alarm.id, one.name))
            if last is None or not one.wants(alarm.stream, alarm.rule) or one.due(now) > now:
                continue
            notice = reminder(alarm, one.name, last, repeat_after, now)
            if notice is not None:
                errand = ErrandStood(
                    notice=notice.id, alarm=alarm.id, receiver=one.name, at=notice.at, due=now, known_at=now
                )
                out.append(Reminder(notice=notice, errand=errand))
    return tuple(out)
