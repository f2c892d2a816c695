"""Alarms, notices and measures as builtins, ready for JSON: times as RFC 3339 UTC, numbers as numbers."""

from __future__ import annotations

from collections.abc import Iterable
from typing import Any

import msgspec

from monitor.alarms.alarm import Alarm, AlarmChange, Notice
from monitor.alarms.rates import AlarmRates
from monitor.render.times import utc_text
from monitor.render.words.alarm import PlanFacts, notice_text


def _time(ns: int | None) -> str | None:
    return None if ns is None else utc_text(ns)


def alarm_document(alarm: Alarm, changes: Iterable[AlarmChange]) -> dict[str, Any]:
    """One alarm with its history, oldest first."""
    return {
        "id": alarm.id,
        "stream": alarm.stream,
        "rule": alarm.rule,
        "state": alarm.state,
        "standing": alarm.standing,
        "raised_at": utc_text(alarm.raised_at),
        "raised_after_events": alarm.raised_after_events,
        "direction": alarm.direction,
        "cause": alarm.cause,
        "changed_at": _time(alarm.changed_at),
        "changed_between": None if alarm.changed_between is None else [utc_text(t) for t in alarm.changed_between],
        "unit": alarm.unit,
        "measure": alarm.measure,
        "before": alarm.before,
        "after": alarm.after,
        "priority": alarm.priority,
        "message": alarm.message,
        "response": alarm.response,
        "acknowledged_by": alarm.seen_by,
        "shelved_until": _time(alarm.shelved_until),
        "waiting_until": _time(alarm.wait_until),
        "held": alarm.held,
        "held_until": _time(alarm.held_until),
        "decisions": [{**msgspec.to_builtins(one), "at": utc_text(one.at)} for one in alarm.decisions],
        "history": [
            {
                "at": utc_text(one.at), "from": one.from_state, "to": one.to_state, "by": one.by, "note": one.note,
                "cause": one.cause,
            }
            for one in changes
        ],
    }  # fmt: skip


def notice_data(notice: Notice, alarm: Alarm, changes: Iterable[AlarmChange], facts: PlanFacts) -> dict[str, Any]:
    """The data of the CloudEvent that tells a notice: the sentence, and the whole alarm as it then was."""
    return {
        "text": notice_text(notice.kind, alarm, notice.at, facts),
        "kind": notice.kind,
        "at": utc_text(notice.at),
        "alarm": alarm_document(alarm, changes),
    }


def rates_document(rates: AlarmRates) -> dict[str, Any]:
    """The measures of the alarm system; spans in seconds."""
    return {
        "from": utc_text(rates.start),
        "to": utc_text(rates.end),
        "announced": rates.announced,
        "announced_a_day": rates.a_day,
        "most_in_ten_minutes": rates.busiest,
        "flooded": rates.flooded,
        "by_priority": dict(rates.by_priority),
        "standing_long": [{"alarm": one.alarm, "seconds": one.stands_for / 1e9} for one in rates.standing],
        "chattering": [
            {"alarm": one.alarm, "times": one.times, "within_seconds": one.within / 1e9, "since": utc_text(one.since)}
            for one in rates.chattering
        ],
    }
