"""How the alarms as a whole are doing: how many a day, which stand too long, which chatter.

The measures are those that IEC 62682 / ISA-18.2 name for watching an alarm system; the reference figures are the ones
of its guidance for one operator, repeated from EEMUA 191 [all from memory]. A tail watch raises a few alarms a year, so
that anything near these figures means rules that do not fit their stream.
"""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Iterable, Sequence

import msgspec

from monitor.alarms.alarm import Alarm, AlarmChange
from monitor.alarms.priorities import DAY, MINUTE, PRIORITIES, Priority
from monitor.alarms.states import UNACKNOWLEDGED

STANDING_LONG = DAY
"""A standing (stale) alarm: one that stands for more than a day."""
CHATTERS, CHATTERS_WITHIN = 3, 10 * MINUTE
"""Common practice: three announcements within minutes; the guidance's "three in one minute" is finer than a slot."""
FLOOD, FLOOD_WITHIN = 10, 10 * MINUTE
"""A flood: more than ten announcements in ten minutes."""
MANAGEABLE_A_DAY, TOO_MANY_A_DAY = 150, 300
"""Announcements a day that one operator very likely manages, and the most that can be managed."""


class Chatter(msgspec.Struct, frozen=True, kw_only=True):
    """An alarm that was announced again and again: how often at most within `within` ns, and since when."""

    alarm: str
    times: int
    within: int
    since: int


class Standing(msgspec.Struct, frozen=True, kw_only=True):
    """An alarm that has stood for long, ns."""

    alarm: str
    stands_for: int


class AlarmRates(msgspec.Struct, frozen=True, kw_only=True):
    """The measures over a span. `announced` counts every move to unacknowledged, repeats included.

    busiest      the most announcements within ten minutes; flooded tells whether that is a flood
    by_priority  alarms first announced in the span, by priority
    """

    start: int
    end: int
    announced: int
    a_day: float
    busiest: int
    flooded: bool
    by_priority: dict[Priority, int]
    standing: tuple[Standing, ...]
    chattering: tuple[Chatter, ...]


def alarm_rates(alarms: Iterable[Alarm], changes: Iterable[AlarmChange], start: int, end: int) -> AlarmRates:
    """Measure the span [start, end), ns; standing alarms are those that stand at its end.

    Parameters: alarms as they are at `end`; changes, at least all of the span.
    Raises ValueError when the span is empty.
    """
    if end <= start:
        raise ValueError("the span is empty")
    held = {alarm.id: alarm for alarm in alarms}
    times: dict[str, list[int]] = {}
    for change in changes:
        if start <= change.at < end and _announces(change):
            times.setdefault(change.alarm, []).append(change.at)
    every = sorted(moment for moments in times.values() for moment in moments)
    busiest = _most_within(every, FLOOD_WITHIN)
    found = (_chatter(alarm, sorted(moments)) for alarm, moments in sorted(times.items()))
    return AlarmRates(
        start=start,
        end=end,
        announced=len(every),
        a_day=len(every) * DAY / (end - start),
        busiest=busiest.times,
        flooded=busiest.times > FLOOD,
        by_priority={
            priority: sum(held[name].priority == priority for name in times if name in held) for priority in PRIORITIES
        },
        standing=tuple(
            Standing(alarm=alarm.id, stands_for=end - alarm.raised_at)
            for alarm in sorted(held.values(), key=lambda alarm: (alarm.raised_at, alarm.id))
            if alarm.standing and alarm.is_open and end - alarm.raised_at > STANDING_LONG
        ),
        chattering=tuple(one for one in found if one is not None),
    )


def _announces(change: AlarmChange) -> bool:
    return change.to_state == UNACKNOWLEDGED and change.from_state != UNACKNOWLEDGED


class _Burst(msgspec.Struct, frozen=True):
    times: int
    since: int


def _most_within(moments: Sequence[int], within: int) -> _Burst:
    """The most of the sorted moments that fall into one span (t - within, t]."""
    best = _Burst(0, 0)
    for last, moment in enumerate(moments):
        first = bisect_left(moments, moment - within + 1)
        if last - first + 1 > best.times:
            best = _Burst(last - first + 1, moments[first])
    return best


def _chatter(alarm: str, moments: Sequence[int]) -> Chatter | None:
    burst = _most_within(moments, CHATTERS_WITHIN)
    if burst.times < CHATTERS:
        return None
    return Chatter(alarm=alarm, times=burst.times, within=CHATTERS_WITHIN, since=burst.since)
