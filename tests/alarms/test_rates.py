"""Measures of the alarm system, on made-up histories whose counts are plain to see."""

from __future__ import annotations

import msgspec
import pytest

from monitor.alarms.alarm import AlarmChange
from monitor.alarms.priorities import DAY, HOUR, MINUTE, POLICIES, PRIORITIES, RULES, policy_for
from monitor.alarms.rates import alarm_rates
from tests.alarms.examples import T0, alarm_in


def announced(alarm: str, at: int, from_state: str = "normal") -> AlarmChange:
    return AlarmChange(alarm=alarm, at=at, from_state=from_state, to_state="unacknowledged", cause="")  # type: ignore[arg-type]


def test_alarms_a_day_count_announcements_inside_the_span() -> None:
    changes = [announced("a", T0 - 1), announced("a", T0), announced("a", T0 + DAY), announced("b", T0 + 2 * DAY)]
    found = alarm_rates([], changes, T0, T0 + 2 * DAY)
    assert (found.announced, found.a_day) == (2, 1.0)
    assert alarm_rates([], [announced("a", T0, "unacknowledged")], T0, T0 + DAY).announced == 0
    with pytest.raises(ValueError, match="empty"):
        alarm_rates([], [], T0, T0)


def test_a_standing_alarm_stands_for_more_than_a_day() -> None:
    alarm = alarm_in("acknowledged")
    closed = msgspec.structs.replace(alarm_in("normal"), id="x")
    gone = msgspec.structs.replace(alarm_in("returned to normal unacknowledged"), id="y")
    assert alarm_rates([alarm], [], T0, T0 + DAY).standing == ()
    found = alarm_rates([alarm, closed, gone], [], T0, T0 + DAY + 1)
    assert [(one.alarm, one.stands_for) for one in found.standing] == [(alarm.id, DAY + 1)]


def test_three_announcements_within_ten_minutes_are_chatter() -> None:
    calm = [announced("a", T0 + n * 10 * MINUTE) for n in range(5)]
    assert alarm_rates([], calm, T0, T0 + DAY).chattering == ()
    on_the_edge = [announced("e", T0 + n * 5 * MINUTE) for n in range(3)]
    assert alarm_rates([], on_the_edge, T0, T0 + DAY).chattering == ()
    restless = [announced("b", T0 + HOUR + n * 4 * MINUTE) for n in range(4)]
    found = alarm_rates([], calm + restless, T0, T0 + DAY).chattering
    assert [(one.alarm, one.times, one.since) for one in found] == [("b", 3, T0 + HOUR)]


def test_more_than_ten_announcements_in_ten_minutes_are_a_flood() -> None:
    ten = [announced(str(n), T0 + n * MINUTE // 2) for n in range(10)]
    assert not alarm_rates([], ten, T0, T0 + DAY).flooded
    found = alarm_rates([], [*ten, announced("x", T0 + 9 * MINUTE)], T0, T0 + DAY)
    assert (found.flooded, found.busiest) == (True, 11)


def test_alarms_are_counted_by_priority_once_each() -> None:
    alarm = alarm_in("unacknowledged")
    changes = [announced(alarm.id, T0), announced(alarm.id, T0 + HOUR)]
    assert alarm_rates([alarm], changes, T0, T0 + DAY).by_priority == {"high": 0, "medium": 1, "low": 0}


def test_every_rule_has_a_priority_and_a_response_that_settings_may_replace() -> None:
    assert set(POLICIES) == set(RULES)
    for policy in POLICIES.values():
        assert policy.priority in PRIORITIES
        assert policy.response[0].islower()
        assert policy.response[-1].isalpha()
    changed = policy_for("fit", {"priority": "high", "response": "call Ana"})
    assert (changed.priority, changed.response, changed.off_delay) == ("high", "call Ana", POLICIES["fit"].off_delay)
    assert policy_for("fit") == POLICIES["fit"]
