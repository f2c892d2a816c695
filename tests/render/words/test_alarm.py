"""The sentences of alarms: direction, since when, before and after in units, the limit, what to do; harmless names."""

from __future__ import annotations

import json
import re

import msgspec
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.alarms.alarm import Alarm, Outcome
from monitor.alarms.known import KnownChange
from monitor.alarms.machine import raise_alarm, step
from monitor.alarms.priorities import DAY, HOUR, MINUTE, POLICIES, RULES
from monitor.alarms.rates import alarm_rates
from monitor.alarms.stimuli import Acknowledge, Cleared, Decide, Remove, Shelve, Speaks, Ticked
from monitor.render.alarm_documents import alarm_document, notice_data, rates_document
from monitor.render.words.alarm import PlanFacts, alarm_message, notice_text, rate_words, state_words
from tests.alarms.examples import SPOKE, T0, alarm_in, policy, spoke

# T0 is 21 September 2026, 14:13:20 UTC: 15:13 in Lisbon.
FACTS = PlanFacts(timezone="Europe/Lisbon", unit="units", one_in=10_000, limit=6000.0, planned=True)


def made(rule: str, **changes: object) -> Alarm:
    return raise_alarm(spoke(rule=rule, **changes), POLICIES[rule]).alarm  # type: ignore[index]


def test_the_sentence_of_a_heavier_tail() -> None:
    assert alarm_message(raise_alarm(SPOKE, policy()).alarm, FACTS) == (
        "north-dock: tail heavier since about 14:13 WEST (13:13 to 14:43); one event in 10 000 passes 9 400 units now "
        "(planned 5 200), above the limit of 6 000 units. Look for what changed then, and decide whether the plan "
        "still holds."
    )


@pytest.mark.parametrize(
    ("rule", "changes", "first"),
    [
        ("exponent", {"direction": "lighter", "after": 3100.0},
         "tail lighter since about 14:13 WEST (13:13 to 14:43); one event in 10 000 passes 3 100 units now "
         "(planned 5 200), still below the limit of 6 000 units."),
        ("tail share", {"measure": "share", "before": 0.05, "after": 0.08},
         "more large events since about 14:13 WEST (13:13 to 14:43); now 8.0 % of events (before 5.0 %)."),
        ("tail share", {"measure": "none", "direction": "lighter"},
         "fewer large events since about 14:13 WEST (13:13 to 14:43)."),
        ("fit", {"measure": "none", "changed_between": None},
         "sizes no longer follow a power law since about 14:13 WEST."),
        ("level", {"measure": "rate", "before": 1 / 30, "after": 0.21},
         "the limit of 6 000 units has been passed more often than agreed since about 14:13 WEST (13:13 to 14:43); "
         "now once in 4.8 days (agreed once in 30 days)."),
        ("rival", {"measure": "none", "cause": "power law with cut-off"},
         "the tail looks like a power law with cut-off rather than a plain power law since about 14:13 WEST "
         "(13:13 to 14:43)."),
        ("body", {"measure": "none"}, "the ordinary sizes have changed since about 14:13 WEST (13:13 to 14:43)."),
        ("no events", {"measure": "silence", "before": 12.0, "after": 2400.0, "changed_at": None},
         "no events, seen at 15:13 WEST; none for 40 minutes, usually one every 12 seconds."),
        ("rejects", {"measure": "share", "before": 0.001, "after": 0.3},
         "more lines than usual cannot be used since about 14:13 WEST (13:13 to 14:43); now 30 % of lines "
         "(before 0.10 %)."),
        ("single event", {"measure": "size", "before": 5100.0, "after": 9400.0, "cause": "above the limit"},
         "one event of 9 400 units at 15:13 WEST, above the limit; the limit is 6 000 units."),
        ("single event", {"measure": "size", "before": 5100.0, "after": 5400.0, "cause": "larger than the tail allows"},
         "one event of 5 400 units at 15:13 WEST, larger than the tail allows; the largest before was 5 100 units."),
    ],
)  # fmt: skip
def test_the_first_sentence_of_each_rule(rule: str, changes: dict[str, object], first: str) -> None:
    message = alarm_message(made(rule, **changes), FACTS)
    assert message.startswith(f"north-dock: {first} ")
    response = POLICIES[rule].response  # type: ignore[index]
    assert message.removeprefix(f"north-dock: {first} ") == f"{response[0].upper()}{response[1:]}."


def test_times_of_other_days_name_their_day_and_a_change_of_the_clocks_its_zones() -> None:
    days_ago = made("exponent", changed_at=T0 - 3 * DAY, changed_between=(T0 - 4 * DAY, T0 - 2 * DAY))
    assert "since about 18 Sep 15:13 WEST (17 Sep 15:13 WEST to 19 Sep 15:13 WEST);" in alarm_message(days_ago, FACTS)


def test_a_single_event_is_told_with_its_own_moment() -> None:
    first = made("single event", measure="size", after=9400.0, direction=None, cause="above the limit")
    again = spoke(
        rule="single event", at=T0 + DAY, measure="size", after=8800.0, direction=None, cause="above the limit"
    )
    message = alarm_message(step(first, Speaks(spoke=again), T0 + DAY).alarm, FACTS)
    assert message.startswith("north-dock: one event of 8 800 units at 22 Sep 15:13 WEST, above the limit;")


def test_without_a_limit_or_figures_nothing_is_invented() -> None:
    facts = msgspec.structs.replace(FACTS, limit=None, planned=False)
    assert "one event in 10 000 passes 9 400 units now (before 5 200). Look" in alarm_message(made("exponent"), facts)
    assert "(13:13 to 14:43). Look" in alarm_message(made("exponent", after=None), facts)
    assert "passes 9 400 units now, above the limit" in alarm_message(made("exponent", before=None), FACTS)


@pytest.mark.parametrize(
    ("a_day", "words"),
    [
        (0.0, "never"),
        (1.0, "once a day"),
        (3.24, "3.2 times a day"),
        (40.0, "40 times a day"),
        (1 / 30, "once in 30 days"),
    ],
)
def test_rates(a_day: float, words: str) -> None:
    assert rate_words(a_day) == words


TEXT = st.text(max_size=20)
FIGURE = st.none() | st.floats(0.0, 1e15)


@settings(max_examples=300, deadline=None, derandomize=True)
@given(
    rule=st.sampled_from(RULES), stream=TEXT, cause=st.none() | TEXT, before=FIGURE, after=FIGURE, response=TEXT,
    measure=st.sampled_from(["level", "share", "rate", "size", "silence", "none"]),
    direction=st.sampled_from(["heavier", "lighter", None]),
)  # fmt: skip
def test_whatever_happens_it_is_one_harmless_line(
    rule, stream, cause, before, after, response, measure, direction
) -> None:  # type: ignore[no-untyped-def]
    alarm = made(rule, stream=stream, cause=cause, before=before, after=after, measure=measure, direction=direction)
    message = alarm_message(msgspec.structs.replace(alarm, response=response), FACTS)
    assert message.isprintable()
    assert message.endswith(".")
    assert not re.search(r"None|nan|inf\b", message.replace(stream, "").replace(cause or "\0", ""))


def told(outcome: Outcome) -> list[str]:
    alarm = msgspec.structs.replace(outcome.alarm, message="The message.")
    return [notice_text(notice.kind, alarm, notice.at, FACTS) for notice in outcome.notices]


def test_each_kind_of_notice_has_its_sentence() -> None:
    alarm = alarm_in("unacknowledged")
    seen = alarm_in("acknowledged")
    t = T0 + HOUR
    assert told(raise_alarm(SPOKE, policy())) == ["The message."]
    again = step(alarm_in("returned to normal unacknowledged"), Speaks(spoke=spoke(at=t)), t)
    assert told(again) == ["Again, at 16:13 WEST: The message."]
    assert told(step(alarm, Cleared(), t)) == [
        "north-dock: tail heavier: back to normal since 16:13 WEST, but nobody has acknowledged the alarm."
    ]
    assert told(step(alarm, Acknowledge(by="ana"), t)) == [
        "north-dock: tail heavier: acknowledged by ana at 16:13 WEST; the condition stands."
    ]
    assert told(step(alarm, Decide(by="ana", choice="data-fault", note="scale\nbroken"), t)) == [
        "north-dock: tail heavier: acknowledged by ana, decided as data-fault (scale broken) at 16:13 WEST; the "
        "condition stands."
    ]
    assert told(step(seen, Cleared(), t)) == ["north-dock: tail heavier: closed at 16:13 WEST."]
    assert told(step(seen, Decide(by="bo", choice="accept"), t)) == [
        "north-dock: tail heavier: closed at 16:13 WEST, decided as accept by bo."
    ]
    assert told(step(seen, Shelve(by="bo", until=T0 + DAY), t)) == [
        "north-dock: tail heavier: shelved until 22 Sep 15:13 WEST, at 16:13 WEST."
    ]
    assert told(step(seen, Remove(by="bo", note="x"), t)) == [
        "north-dock: tail heavier: out of service, at 16:13 WEST."
    ]
    assert notice_text("reminder", msgspec.structs.replace(alarm, message="The message."), t, FACTS) == (
        "Nobody has acknowledged this since 15:13 WEST: The message."
    )


def test_states_say_what_holds_them() -> None:
    fair = KnownChange(start=T0, end=T0 + DAY, streams="*", reason="fair\x1b", effect="hold notices")
    zone = "Europe/Lisbon"
    assert (
        state_words(raise_alarm(SPOKE, policy(), [fair]).alarm, zone, T0) == "unacknowledged (held, planned: fair\\x1b)"
    )
    assert state_words(alarm_in("shelved"), zone, T0) == "shelved until 22 Sep 15:13 WEST"
    assert state_words(raise_alarm(SPOKE, policy(on_delay=MINUTE)).alarm, zone, T0) == "on-delay until 15:14 WEST"
    waiting = step(alarm_in("unacknowledged"), Decide(by="a", choice="wait", until=T0 + HOUR), T0).alarm
    assert state_words(waiting, zone, T0) == "acknowledged (waiting until 16:13 WEST)"
    assert state_words(alarm_in("out of service"), zone, T0) == "out of service"


def test_the_document_of_an_alarm_holds_what_is_promised() -> None:
    opened = raise_alarm(SPOKE, policy())
    outcome = step(opened.alarm, Acknowledge(by="ana", note="looking"), T0 + MINUTE)
    found = alarm_document(outcome.alarm, [*opened.changes, *outcome.changes])
    promised = {
        "id", "stream", "rule", "state", "raised_at", "raised_after_events", "direction", "changed_at",
        "changed_between", "unit", "before", "after", "priority", "message", "history",
    }  # fmt: skip
    assert promised <= set(found)
    assert found["raised_at"] == "2026-09-21T14:13:20Z"
    assert found["changed_between"] == ["2026-09-21T12:13:20Z", "2026-09-21T13:43:20Z"]
    assert [(one["from"], one["to"], one["by"], one["note"]) for one in found["history"]] == [
        ("normal", "unacknowledged", None, None),
        ("unacknowledged", "acknowledged", "ana", "looking"),
    ]
    assert json.loads(json.dumps(found)) == found


def test_the_data_of_a_notice_and_the_measures_are_plain_json() -> None:
    outcome = step(raise_alarm(SPOKE, policy()).alarm, Ticked(), T0)
    opened = raise_alarm(SPOKE, policy())
    data = notice_data(opened.notices[0], msgspec.structs.replace(outcome.alarm, message="M."), opened.changes, FACTS)
    assert (data["text"], data["kind"], data["at"]) == ("M.", "raised", "2026-09-21T14:13:20Z")
    assert json.loads(json.dumps(data)) == data
    rates = rates_document(alarm_rates([opened.alarm], opened.changes, T0, T0 + 2 * DAY))
    assert (rates["announced"], rates["announced_a_day"]) == (1, 0.5)
    assert rates["standing_long"] == [{"alarm": opened.alarm.id, "seconds": 2 * 86_400.0}]
    assert json.loads(json.dumps(rates)) == rates
