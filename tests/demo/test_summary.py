"""The end of the story on written stores: named or not, in time or not, and alarms without a cause."""

from __future__ import annotations

from pathlib import Path

import pytest

from demo.summary import summary
from demo.warehouse import Change
from storage.facts import Fact
from storage.history import open_reader
from tests.stores import (
    AT,
    HOUR,
    LAST_PANE,
    NOW,
    alarm,
    chain,
    make,
    panes,
    planned,
    settings_fact,
    sizes_of,
    stream,
    watch_of,
)


def told(tmp_path: Path, changes: tuple[Change, ...], *facts: Fact) -> list[str]:
    path = tmp_path / "orders.db"
    with make(path) as store:
        for sealed in panes("dock"):
            store.commit(sealed)
        store.commit([settings_fact(), chain(), stream("dock"), planned("dock"), *watch_of("dock"), *facts])
    with open_reader(path) as reader:
        return summary(reader, changes, 200_000)


HEAVIER = alarm("dock", "exponent", direction="heavier", changed_at=AT - HOUR, changed_between=(AT - 2 * HOUR, AT))


@pytest.mark.parametrize(
    ("hours_before", "words"),
    [(1, "which holds the true moment"), (5, "which does not hold the true moment")],
)
def test_a_change_that_an_alarm_names(tmp_path: Path, hours_before: int, words: str) -> None:
    change = Change("dock", AT - hours_before * HOUR, "heavier orders", shift=-0.4)
    lines = told(tmp_path, (change,), *HEAVIER)
    hour = "hour" if hours_before == 1 else "hours"
    assert f"Named by the rule exponent (heavier), {hours_before} {hour} and 0 tail events later" in lines[2]
    assert lines[2].endswith(f"{words}.")
    assert "Where nothing had changed, " in lines[-2]
    assert ": 0 alarms; promised were at most 0.04" in lines[-2]  # 20 days at one in 450
    assert lines[-1] == "200 000 lines written, 200 000 read: 199 955 events, 5 spoilt lines rejected."


def test_tail_events_are_counted_from_the_change_on(tmp_path: Path) -> None:
    late = alarm("dock", "exponent", direction="heavier", at=LAST_PANE)
    change = Change("dock", AT, "heavier orders", shift=-0.4)
    lines = told(tmp_path, (change,), *late)
    tail = int((sizes_of("dock") >= 120).sum())
    assert f"1 hour and {tail} tail events later; this rule does not say since when." in lines[2]


def test_another_rule_first_and_nothing_that_names_it(tmp_path: Path) -> None:
    change = Change("dock", AT - HOUR, "orders are split", named_by=("fit", "rival"))
    lines = told(tmp_path, (change,), *HEAVIER)
    assert lines[2].strip().startswith("First alarm by the rule exponent (heavier), 1 hour")
    assert lines[3].strip() == "No alarm named it by the end of the story."
    assert lines[4].strip() == (
        "Promised: at most one false alarm in 450 days; no delay is promised for a change of this kind."
    )


def test_an_alarm_before_the_change_is_a_false_one_and_the_end_may_come_first(tmp_path: Path) -> None:
    lines = told(tmp_path, (Change("dock", NOW + HOUR, "heavier orders"),), *HEAVIER)
    assert lines[2].strip() == "The story ended before this."
    assert "1 alarm (dock: exponent); promised were at most" in lines[-2]
