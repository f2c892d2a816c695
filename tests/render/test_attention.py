"""What is told first, what is told once, and what is only counted; streams before their watch, and after an accept."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import msgspec
import pytest

from monitor.alarms.alarm import Alarm
from monitor.alarms.stimuli import Acknowledge, Cleared, Remove, Shelve, Stimulus
from monitor.cli.watching import StoreWatch
from monitor.errors import DataError
from monitor.render.attention import in_order, sorted_stream, telling_alarm, to_acknowledge, told_alarms
from monitor.render.frame import Look, as_text
from monitor.render.screen import overview
from monitor.render.seen import Seen
from monitor.render.stream_rows import state_word
from monitor.render.words.findings import Finding
from monitor.render.words.watch import promise_words, unwatched_words, way_bar, way_percent, way_words
from monitor.watch.rules import Reading
from storage.facts import AlarmStood, ChangeAccepted, Fact
from tests.stores import (
    HOUR,
    LAST_PANE,
    NOW,
    alarm,
    chain,
    first_window,
    gof,
    judged,
    make,
    north_dock,
    planned,
    quiet_refits,
    refit,
    settings_fact,
    stream,
    watch_of,
)


def made(rule: str, *stimuli: Stimulus, **spoken: Any) -> Alarm:
    stood = alarm("dock", rule, *stimuli, **spoken)[0]
    assert isinstance(stood, AlarmStood)
    return msgspec.json.decode(stood.alarm, type=Alarm)


ACK, GONE = Acknowledge(by="ana"), Cleared()


def seen_of(tmp_path: Path, *facts: Fact) -> Seen:
    with make(tmp_path / "orders.db") as store:
        store.commit([settings_fact(), chain(), *facts])
    with StoreWatch(tmp_path / "orders.db") as watch:
        return watch.look()


def test_alarms_come_by_state_then_by_priority() -> None:
    alarms = [
        made("level", ACK), made("fit"), made("exponent"), made("single event", GONE), made("body", ACK),
        made("no events", Shelve(by="ana", until=NOW)), made("rejects", Remove(by="ana", note="no lines")),
    ]  # fmt: skip
    assert [one.rule for one in told_alarms(alarms)] == ["exponent", "fit", "single event", "level", "body"]


@pytest.mark.parametrize(
    ("kind", "rule", "direction", "told"),
    [
        ("heavier", "exponent", "heavier", True),
        ("heavier", "tail share", "heavier", True),
        ("heavier", "exponent", "lighter", False),  # the refit says the contrary: that is news
        ("lighter", "tail share", "lighter", True),
        ("heavier", "fit", None, False),
        ("fit", "fit", None, True),
        ("fit", "rival", None, True),
        ("fit", "exponent", "heavier", False),
        ("limit", "level", "heavier", True),
        ("limit", "exponent", "heavier", False),
        ("failed", "exponent", "heavier", False),
    ],
)
def test_a_flag_is_told_by_the_alarm_that_says_the_same(kind: Any, rule: str, direction: Any, told: bool) -> None:
    found = telling_alarm(Finding(kind=kind, headline="x"), [made(rule, direction=direction)])
    assert (found is not None) == told


def test_a_suppressed_alarm_still_tells_its_flag_but_asks_for_nothing(tmp_path: Path) -> None:
    shelved = alarm("north-dock", "exponent", Shelve(by="ana", until=NOW + HOUR), direction="heavier")
    seen = seen_of(tmp_path, *north_dock(), *shelved, *watch_of("north-dock"))
    one = sorted_stream(seen.streams[0], seen.plan.timezone, NOW)
    assert (one.alarms, one.needs_a_look, [flag.kind for flag in one.flags]) == ((), False, ["limit"])
    text = as_text(overview(seen, NOW, Look(width=120, height=40)))
    assert "1 stream: nothing needs a look; 1 alarm shelved; 1 stream flagged by refits alone." in text
    assert to_acknowledge(seen.streams[0]) is None


def test_the_first_alarm_that_can_be_acknowledged(tmp_path: Path) -> None:
    facts = [*alarm("dock", "level", ACK), *alarm("dock", "fit", GONE), *alarm("dock", "body")]
    seen = seen_of(tmp_path, stream("dock"), first_window("dock"), *quiet_refits("dock"), *facts, *watch_of("dock"))
    found = to_acknowledge(seen.streams[0])
    assert found is not None
    assert found.rule == "body"


def test_streams_come_by_what_they_need(tmp_path: Path) -> None:
    seen = seen_of(
        tmp_path,
        *(fact for name in ("e-quiet", "d-seen", "b-failed", "a-new") for fact in (stream(name), planned(name))),
        *north_dock(),  # flagged by its refits alone
        refit("b-failed", LAST_PANE, None, state="failed", reason="the worker died 3 times"),
        *alarm("a-new", "body"), *alarm("d-seen", "level", ACK),
    )  # fmt: skip
    order = in_order(seen, NOW)
    assert [one.stream.name for one in order] == ["a-new", "b-failed", "d-seen", "north-dock", "e-quiet"]
    assert [state_word(one) for one in order] == ["body", "failed", "limit, seen", "3 refits", "new"]
    assert sum(one.needs_a_look for one in order) == 2


def test_hundreds_of_alarms_are_counted_and_none_is_lost(tmp_path: Path) -> None:
    names = [f"dock-{i:03d}" for i in range(300)]
    facts = [fact for name in names for fact in (stream(name), *alarm(name, "body"))]
    text = as_text(overview(seen_of(tmp_path, *facts), NOW, Look(width=80, height=24), live=True))
    assert "300 of 300 streams need a look: 300 alarms." in text
    shown = sum("the ordinary sizes have changed" in line for line in text.splitlines())
    assert f"and {300 - shown} alarms or faults more" in text


def test_what_is_not_watched_says_why(tmp_path: Path) -> None:
    few = judged(2.4, 0.2, gof(0.6, 0.5, 0.7), n_tail=310)
    accepted = ChangeAccepted(
        id="c", stream="later", since=LAST_PANE - HOUR, by="ana", note="new customer", known_at=NOW
    )
    seen = seen_of(
        tmp_path, stream("early"), refit("early", LAST_PANE, few), stream("later"), first_window("later"),
        *quiet_refits("later"), *watch_of("later"), accepted,
    )  # fmt: skip
    early, later = seen.streams
    assert unwatched_words(early) == (
        "Not watched yet: a baseline needs a window with 500 tail events; the last has 310."
    )
    assert (later.watch, later.baseline) == (None, None)
    assert unwatched_words(later).startswith("Not watched for now: a change was accepted")


def test_a_promise_that_could_not_be_kept_says_so(tmp_path: Path) -> None:
    seen = seen_of(tmp_path, stream("dock"), first_window("dock"), *watch_of("dock"))
    watch = seen.streams[0].watch
    assert watch is not None
    assert watch.ground is not None
    assert promise_words(watch) == (
        "Promise: at most one false alarm in 450 days on average, all rules of this stream together; "
        "measured on the stream's own past (40 days resampled)."
    )
    broken = msgspec.structs.replace(watch, ground=msgspec.structs.replace(watch.ground, kept=False, words="it swings"))
    assert promise_words(broken).startswith("Not promised: at most one false alarm in 450 days")
    assert "rests on independence" in promise_words(msgspec.structs.replace(watch, ground=None))


@pytest.mark.parametrize(
    ("way", "bar", "words"),
    [
        (0.0, "..........", "far from speaking"), (0.07, "#.........", "far from speaking"),
        (0.12, "#.........", "on its way, towards heavier"), (0.5, "#####.....", "half way, towards heavier"),
        (0.7, "#######...", "near speaking, towards heavier"), (0.99, "#########.", "about to speak, towards heavier"),
        (1.0, "##########", "speaks, towards heavier"),
    ],
)  # fmt: skip
def test_the_way_in_cells_and_words(way: float, bar: str, words: str) -> None:
    reading = Reading(
        rule="exponent", stream="dock", at_ns=0, ln_p=(), ln_q=(), ln_statistic=1.0, ln_threshold=7.0, way=way,
        direction="heavier",
    )  # fmt: skip
    assert (way_bar(way), way_words(reading)) == (bar, words)


@pytest.mark.parametrize(
    ("way", "words"), [(0.0, "under 1 %"), (0.0099, "under 1 %"), (0.4949, "49 %"), (0.999, "99 %"), (1.0, "100 %")]
)
def test_the_way_in_per_cent(way: float, words: str) -> None:
    assert way_percent(way) == words


@pytest.mark.parametrize("change", ["update alarm set alarm = '{}'", "update watch set watch = '[1]'",
                                    "update watch_state set readings = '{\"rule\": 1}'"])  # fmt: skip
def test_a_record_that_was_tampered_with_is_named(tmp_path: Path, change: str) -> None:
    with make(tmp_path / "orders.db") as store:
        store.commit([settings_fact(), chain(), stream("dock"), first_window("dock"), *watch_of("dock")])
        store.commit(alarm("dock", "body"))
        store.db.execute(change)
    with StoreWatch(tmp_path / "orders.db") as watch, pytest.raises(DataError, match="cannot be read"):
        watch.look()
