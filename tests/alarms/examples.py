"""Alarms for tests, in every state, reached by legal moves."""

from __future__ import annotations

import msgspec

from monitor.alarms.alarm import Alarm, Spoke
from monitor.alarms.machine import raise_alarm, step
from monitor.alarms.priorities import DAY, HOUR, MINUTE, POLICIES, Policy
from monitor.alarms.states import State
from monitor.alarms.stimuli import Acknowledge, Cleared, Remove, Shelve, Stimulus

T0 = 1_790_000_000 * 1_000_000_000
"""Some moment: 21 September 2026."""

SPOKE = Spoke(
    stream="north-dock", rule="exponent", at=T0, events=1810, direction="heavier", changed_at=T0 - HOUR,
    changed_between=(T0 - 2 * HOUR, T0 - HOUR // 2), unit="units", measure="level", before=5200.0, after=9400.0,
)  # fmt: skip


def spoke(**changes: object) -> Spoke:
    return msgspec.structs.replace(SPOKE, **changes)


def policy(**changes: object) -> Policy:
    return msgspec.structs.replace(POLICIES["exponent"], **changes)


def after(alarm: Alarm, *stimuli: Stimulus, t: int = T0 + MINUTE) -> Alarm:
    for stimulus in stimuli:
        outcome = step(alarm, stimulus, t)
        assert outcome.refused is None, outcome.refused
        alarm = outcome.alarm
    return alarm


def alarm_in(state: State, *, stands: bool = True, seen: bool = False, momentary: bool = False) -> Alarm:
    """An alarm that came into this state by legal moves."""
    alarm = raise_alarm(SPOKE, policy(momentary=momentary)).alarm
    if state == "normal":
        return after(alarm, Acknowledge(by="ana"), Cleared())
    if state == "returned to normal unacknowledged":
        return after(alarm, Cleared())
    if state == "acknowledged":
        return after(alarm, Acknowledge(by="ana"))
    if seen:
        alarm = after(alarm, Acknowledge(by="ana"))
    if state == "shelved":
        alarm = after(alarm, Shelve(by="ana", until=T0 + DAY))
    elif state == "out of service":
        alarm = after(alarm, Remove(by="ana", note="sensor exchanged"))
    return alarm if stands else after(alarm, Cleared())
