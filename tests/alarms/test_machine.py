"""What becomes of alarms: delays, return, shelves, decisions, holds, notices, reminders."""

from __future__ import annotations

import msgspec
import pytest

from monitor.alarms.alarm import AcceptChange, AddKnown, Alarm, KeepOut, RestartRule, notice_id
from monitor.alarms.decisions import MEANINGS, only_this
from monitor.alarms.known import KnownChange
from monitor.alarms.machine import raise_alarm, reminder, step
from monitor.alarms.priorities import DAY, HOUR, MINUTE, POLICIES
from monitor.alarms.states import CHOICES
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
    Ticked,
    Unshelve,
)
from tests.alarms.examples import SPOKE, T0, after, alarm_in, policy, spoke

HOLD = KnownChange(start=T0 - DAY, end=T0 + DAY, streams="north-*", reason="autumn promotion", effect="hold notices")


def test_an_alarm_is_raised_told_and_named_by_what_it_is_about() -> None:
    outcome = raise_alarm(SPOKE, policy())
    assert outcome.alarm.state == "unacknowledged"
    assert [notice.kind for notice in outcome.notices] == ["raised"]
    assert outcome.alarm.id == raise_alarm(SPOKE, policy(on_delay=HOUR)).alarm.id
    assert outcome.alarm.id != raise_alarm(spoke(at=T0 + 1), policy()).alarm.id
    assert outcome.alarm.id != raise_alarm(spoke(rule="fit"), policy()).alarm.id


def test_an_on_delay_holds_the_alarm_back_and_drops_what_passes() -> None:
    pending = raise_alarm(SPOKE, policy(on_delay=10 * MINUTE))
    assert (pending.alarm.state, pending.notices, pending.alarm.is_open) == ("normal", (), True)
    assert step(pending.alarm, Ticked(), T0 + 9 * MINUTE).alarm == pending.alarm
    late = step(pending.alarm, Ticked(), T0 + HOUR)
    assert (late.alarm.state, late.changes[0].at) == ("unacknowledged", T0 + 10 * MINUTE)
    gone = step(pending.alarm, Cleared(), T0 + MINUTE)
    assert (gone.alarm.is_open, gone.notices) == (False, ())
    assert step(gone.alarm, Ticked(), T0 + DAY).alarm == gone.alarm
    assert (
        step(pending.alarm, Acknowledge(by="bo"), T0 + 1).refused == "it is not announced yet: its on-delay is running"
    )


def test_what_the_rule_says_during_the_on_delay_is_what_is_announced() -> None:
    pending = raise_alarm(SPOKE, policy(on_delay=HOUR)).alarm
    again = step(pending, Speaks(spoke=spoke(at=T0 + MINUTE, after=9900.0)), T0 + MINUTE)
    assert (again.alarm.after, again.alarm.spoken, again.changes) == (9900.0, 2, ())
    assert step(again.alarm, Ticked(), T0 + HOUR).alarm.state == "unacknowledged"


def test_it_returns_to_normal_when_the_statistic_stays_low_for_the_off_delay() -> None:
    alarm = raise_alarm(SPOKE, policy(off_delay=HOUR, return_below=0.2)).alarm
    alarm = step(alarm, Measured(share=0.1), T0 + MINUTE).alarm
    assert alarm.quiet_since == T0 + MINUTE
    alarm = step(alarm, Measured(share=0.2), T0 + 30 * MINUTE).alarm
    assert alarm.quiet_since is None
    alarm = step(alarm, Measured(share=0.0), T0 + 40 * MINUTE).alarm
    assert step(alarm, Measured(share=0.0), T0 + 99 * MINUTE).alarm == alarm
    outcome = step(alarm, Measured(share=0.0), T0 + 100 * MINUTE)
    assert outcome.alarm.state == "returned to normal unacknowledged"
    assert [notice.kind for notice in outcome.notices] == ["returned"]


def test_what_comes_back_is_announced_again_and_has_to_be_acknowledged_again() -> None:
    back = step(
        alarm_in("returned to normal unacknowledged"), Speaks(spoke=spoke(at=T0 + HOUR, after=9900.0)), T0 + HOUR
    )
    assert (back.alarm.state, back.alarm.after, back.alarm.spoken) == ("unacknowledged", 9900.0, 2)
    assert [notice.kind for notice in back.notices] == ["raised again"]


def test_a_rule_that_goes_on_speaking_tells_nobody_twice_but_a_turn_does() -> None:
    alarm = alarm_in("acknowledged")
    again = step(alarm, Speaks(spoke=spoke(at=T0 + HOUR)), T0 + HOUR)
    assert (again.alarm.state, again.alarm.seen_by, again.notices) == ("acknowledged", "ana", ())
    turned = step(alarm, Speaks(spoke=spoke(at=T0 + HOUR, direction="lighter")), T0 + HOUR)
    assert (turned.alarm.state, turned.alarm.direction, turned.alarm.seen_by) == ("unacknowledged", "lighter", None)


def test_an_alarm_that_nobody_has_acknowledged_is_told_again_when_it_turns_but_not_when_it_goes_on() -> None:
    alarm = alarm_in("unacknowledged")
    assert step(alarm, Speaks(spoke=spoke(at=T0 + HOUR)), T0 + HOUR).notices == ()
    turned = step(alarm, Speaks(spoke=spoke(at=T0 + HOUR, direction="lighter", after=3000.0)), T0 + HOUR)
    assert [notice.kind for notice in turned.notices] == ["raised again"]
    assert (turned.alarm.direction, turned.alarm.after) == ("lighter", 3000.0)


def test_each_single_event_is_told_even_while_the_one_before_it_stands() -> None:
    one = spoke(rule="single event", direction=None, measure="size", after=9400.0)
    first = raise_alarm(one, POLICIES["single event"])
    seen = step(first.alarm, Acknowledge(by="ana"), T0 + MINUTE).alarm
    second = step(seen, Speaks(spoke=msgspec.structs.replace(one, at=T0 + 2 * MINUTE, after=8800.0)), T0 + 2 * MINUTE)
    assert (second.alarm.state, second.alarm.seen_by, second.alarm.after) == ("unacknowledged", None, 8800.0)
    assert (second.alarm.raised_at, second.alarm.found_at) == (T0, T0 + 2 * MINUTE)
    assert [notice.kind for notice in second.notices] == ["raised again"]
    third = step(second.alarm, Speaks(spoke=msgspec.structs.replace(one, at=T0 + 3 * MINUTE)), T0 + 3 * MINUTE)
    assert [notice.kind for notice in third.notices] == ["raised again"]


def test_a_shelf_ends_at_its_own_moment_however_late_the_clock_is_looked_at() -> None:
    shelved = step(alarm_in("unacknowledged"), Shelve(by="ana", until=T0 + HOUR), T0 + MINUTE).alarm
    outcome = step(shelved, Acknowledge(by="bo"), T0 + DAY)
    assert [(change.to_state, change.at) for change in outcome.changes] == [
        ("unacknowledged", T0 + HOUR),
        ("acknowledged", T0 + DAY),
    ]
    assert outcome.alarm.shelved_until is None


@pytest.mark.parametrize(
    ("stimulus", "words"),
    [
        (Shelve(by="ana", until=T0), "the end of shelving has passed already"),
        (Shelve(by="ana", until=T0 + 31 * DAY), "it can be shelved for 30 days at most"),
        (Shelve(by=" ", until=T0 + DAY), "an act needs the name of who does it"),
        (Remove(by="ana", note=""), "taking an alarm out of service needs a reason"),
        (Note(by="ana", text=" "), "a note needs its words"),
        (Decide(by="ana", choice="wait"), "waiting needs an end"),
        (Decide(by="ana", choice="wait", until=T0), "the end of waiting has passed already"),
        (Decide(by="ana", choice="planned"), "a planned change needs a reason"),
        (Decide(by="", choice="accept"), "a decision needs the name"),
    ],
)
def test_what_is_asked_for_wrongly_is_refused_in_words(stimulus, words: str) -> None:  # type: ignore[no-untyped-def]
    alarm = alarm_in("unacknowledged")
    outcome = step(alarm, stimulus, T0 + MINUTE)
    assert outcome.refused is not None
    assert outcome.refused.startswith(words)
    assert (outcome.alarm, outcome.changes) == (alarm, ())


def test_out_of_service_keeps_who_and_why_and_has_no_end_but_a_person_s() -> None:
    outcome = step(alarm_in("unacknowledged"), Remove(by="ana", note="scale broken"), T0 + MINUTE)
    assert (outcome.changes[0].by, outcome.changes[0].note) == ("ana", "scale broken")
    assert step(outcome.alarm, Ticked(), T0 + 900 * DAY).alarm == outcome.alarm
    silent = step(outcome.alarm, Speaks(spoke=spoke(at=T0 + HOUR)), T0 + HOUR)
    assert (silent.notices, len(silent.changes)) == ((), 1)
    back = step(silent.alarm, Restore(by="bo"), T0 + DAY)
    assert (back.alarm.state, back.notices[0].kind) == ("unacknowledged", "raised again")


def test_a_known_change_holds_the_notice_but_not_the_alarm() -> None:
    held = raise_alarm(SPOKE, policy(), [HOLD])
    assert (held.alarm.state, held.alarm.held, held.notices) == ("unacknowledged", "autumn promotion", ())
    assert reminder(held.alarm, "desk", T0, HOUR, T0 + 5 * HOUR) is None
    told = step(held.alarm, Ticked(), T0 + 2 * DAY, [HOLD])
    assert [(notice.kind, notice.at) for notice in told.notices] == [("raised", HOLD.end)]
    assert told.alarm.held is None
    gone = step(step(held.alarm, Cleared(), T0 + HOUR).alarm, Ticked(), T0 + 2 * DAY)
    assert gone.notices == ()
    seen = step(held.alarm, Acknowledge(by="ana"), T0 + HOUR)
    assert (seen.alarm.state, seen.notices) == ("acknowledged", ())


def test_holds_that_overlap_hold_to_the_end_of_the_last() -> None:
    later = msgspec.structs.replace(HOLD, start=T0 + HOUR, end=T0 + 3 * DAY, reason="stocktaking")
    held = raise_alarm(SPOKE, policy(), [HOLD, later])
    first = step(held.alarm, Ticked(), T0 + 2 * DAY, [HOLD, later])
    assert (first.alarm.held, first.notices) == ("stocktaking", ())
    assert step(first.alarm, Ticked(), T0 + 4 * DAY, [HOLD, later]).notices[0].at == later.end


def test_each_choice_has_its_consequence() -> None:
    alarm = alarm_in("unacknowledged")
    earliest, latest = alarm.changed_between or (0, 0)
    t, until = T0 + HOUR, T0 + DAY

    def decided(choice: str, until: int | None = None):  # type: ignore[no-untyped-def]
        return step(alarm, Decide(by="ana", choice=choice, note="promotion", until=until, tail_events=400), t)  # type: ignore[arg-type]

    accepted = decided("accept")
    assert accepted.consequences == (AcceptChange(stream="north-dock", since=latest, by="ana", note="promotion"),)
    assert accepted.alarm.state == "normal"
    assert decided("one-off").consequences == (RestartRule(stream="north-dock", rule="exponent"),)
    fault = decided("data-fault")
    assert fault.consequences == (KeepOut(stream="north-dock", start=earliest, end=t, by="ana", note="promotion"),)
    assert fault.alarm.state == "acknowledged"
    planned = decided("planned", until)
    assert [
        (c.change.start, c.change.end, c.change.effect) for c in planned.consequences if isinstance(c, AddKnown)
    ] == [
        (earliest, until, "not in baseline"),
        (t, until, "hold notices"),
    ]
    waiting = decided("wait", until)
    assert waiting.consequences == ()
    assert step(waiting.alarm, Ticked(), until).alarm.state == "unacknowledged"
    for outcome in (accepted, fault, planned, waiting):
        record = outcome.alarm.decisions[-1]
        assert (record.before, record.after, record.unit, record.by) == (5200.0, 9400.0, "units", "ana")
    assert set(MEANINGS) == set(CHOICES)


@pytest.mark.parametrize(("changed_at", "since"), [(T0 - HOUR, T0 - HOUR), (None, T0)])
def test_without_a_set_the_likeliest_moment_counts_and_without_that_the_alarm_s(
    changed_at: int | None, since: int
) -> None:
    alarm = raise_alarm(spoke(changed_between=None, changed_at=changed_at), policy()).alarm
    outcome = step(alarm, Decide(by="ana", choice="accept"), T0 + DAY)
    assert outcome.consequences == (AcceptChange(stream="north-dock", since=since, by="ana", note=""),)


def test_a_declared_change_concerns_this_stream_alone() -> None:
    odd = "site[1]/*?"
    change = msgspec.structs.replace(HOLD, streams=only_this(odd))
    assert change.covers(odd, T0)
    assert not change.covers("site1/xy", T0)


def test_reminders_are_told_at_their_moment_and_once_after_a_stop() -> None:
    alarm = alarm_in("unacknowledged")
    assert reminder(alarm, "desk", T0, HOUR, T0 + HOUR - 1) is None
    due = reminder(alarm, "desk", T0, HOUR, T0 + 3 * HOUR + 5)
    assert due is not None
    assert due.at == T0 + 3 * HOUR
    other = reminder(alarm, "night", T0, HOUR, T0 + 3 * HOUR)
    assert other is not None
    assert other.id != due.id
    for state in ("acknowledged", "shelved", "out of service", "normal", "returned to normal unacknowledged"):
        assert reminder(alarm_in(state), "desk", T0, HOUR, T0 + DAY) is None  # type: ignore[arg-type]


def test_a_notice_has_the_same_id_whenever_it_is_made() -> None:
    assert notice_id("a", "raised", 1) == notice_id("a", "raised", 1)
    assert len({notice_id("a", "raised", 1), notice_id("b", "raised", 1), notice_id("a", "closed", 1)}) == 3


def test_an_alarm_survives_its_row() -> None:
    alarm = after(alarm_in("unacknowledged"), Decide(by="ana", choice="wait", until=T0 + DAY, tail_events=12))
    alarm = after(alarm, Shelve(by="ana", until=T0 + HOUR))
    assert msgspec.json.decode(msgspec.json.encode(alarm), type=Alarm) == alarm


def test_unshelving_by_hand_announces_what_stands() -> None:
    outcome = step(alarm_in("shelved", seen=True), Unshelve(by="bo"), T0 + HOUR)
    assert (outcome.alarm.seen_by, outcome.notices[0].kind) == (None, "raised again")
