"""Tables fit their width; CSV names its units; documents hold what the store holds."""

from __future__ import annotations

import csv
import io
import json

import msgspec
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.cli.watching import StoreWatch
from monitor.render.documents import refit_document, screen_document
from monitor.render.safe import width_of
from monitor.render.seen import Refit, baseline_of, decode_refit
from monitor.render.tables import Column, RefitRow, history_csv, history_table, laid_out, unit_suffix
from storage.facts import BaselineSet
from tests.stores import (
    EVIL,
    HEAVIER,
    HOUR,
    LAST_PANE,
    NOW,
    WIDE,
    against,
    first_window,
    gof,
    judged,
    planned,
    refit,
)

HEAVY = judged(2.21, 0.06, gof(0.31, 0.27, 0.35))


def row(
    name: str = "dock", *, end: int = LAST_PANE, baseline: BaselineSet | None = None, unit: str = "units"
) -> RefitRow:
    stored = refit(name, end, HEAVY, flags=HEAVIER, against=against(2.5, 2.208, 0.00021))
    return RefitRow(refit=decode_refit(stored), unit=unit, baseline=baseline or planned(name))


columns = st.lists(
    st.builds(
        Column,
        title=st.text("abc 倉", max_size=12),
        cells=st.tuples(*[st.text("xyz倉 ", max_size=30)] * 3),
        right=st.booleans(),
        need=st.integers(0, 9),
        shrinks_to=st.none() | st.integers(1, 10),
    ),
    min_size=1,
    max_size=12,
)


@given(columns, st.integers(1, 120))
def test_no_line_of_a_table_is_wider_than_it_may_be(found: list[Column], width: int) -> None:
    lines = laid_out(found, width)
    assert len(lines) == 4
    assert all(width_of(line) <= width for line in lines)


def test_the_history_fits_80_columns_and_a_wider_terminal_shows_more() -> None:
    rows = [row(name, end=LAST_PANE + k * HOUR) for k, name in enumerate(("north-dock", EVIL, "倉庫-十番"))]
    narrow, wide = history_table(rows, "Europe/Lisbon", 80), history_table(rows, "Europe/Lisbon", 200)
    assert all(width_of(line) <= 80 for line in narrow)
    assert narrow[1] == "north-dock     2026-12-01 14:00   2.21  0.31  13 000 units  heavier than planned"
    assert "2.15-2.27" in wide[1]
    assert rows[0].refit.id in wide[1]
    assert "\x1b" not in "".join(wide)


def test_results_are_said_in_words() -> None:
    calm = judged(2.5, 0.06, gof(0.5, 0.4, 0.6))
    stored = [
        refit("d", NOW, None, state="failed", reason="timed out"),
        refit("d", NOW, msgspec.structs.replace(calm, alpha=None, reason="8 events are fewer than 10")),
        refit("d", NOW, calm, against=against(2.5, 2.49, 0.8)),
        refit("d", NOW, calm),
    ]
    rows = [RefitRow(refit=decode_refit(one), unit="units", baseline=first_window("d")) for one in stored]
    results = [line.split("  ")[-1] for line in history_table(rows, "UTC", 240)[1:]]
    assert results == [
        "failed: timed out", "no tail: 8 events are fewer than 10", "as baseline", "nothing to compare with",
    ]  # fmt: skip


def test_over_a_change_of_the_clocks_each_row_names_its_zone() -> None:
    summer = LAST_PANE - 120 * 24 * HOUR
    lines = history_table([row(end=summer), row()], "Europe/Lisbon", 120)
    assert "2026-08-03 15:00 WEST" in lines[1]
    assert "2026-12-01 14:00 WET" in lines[2]


def test_csv_has_units_in_its_column_names_and_the_stores_numbers() -> None:
    text = history_csv([row(), row("=cmd", end=LAST_PANE + HOUR)])
    found = list(csv.DictReader(io.StringIO(text)))
    assert float(found[0]["xmin_units"]) == 120.0
    assert float(found[0]["alpha"]) == HEAVY.alpha
    assert float(found[0]["size_one_in_10000_units"]) == HEAVY.levels[0].size
    assert found[0]["window_to_utc"] == "2026-12-01T14:00:00Z"
    assert found[0]["flags"] == "heavier than planned"
    assert found[1]["stream"] == "'=cmd"


def test_csv_of_different_units_names_the_unit_in_each_row() -> None:
    found = list(csv.DictReader(io.StringIO(history_csv([row(), row(unit="kB")]))))
    assert [one["unit"] for one in found] == ["units", "kB"]
    assert "xmin" in found[0]


@pytest.mark.parametrize(("unit", "suffix"), [("units", "_units"), ("", ""), ("m^3, wet", "_m_3_wet"), ("%", "_%")])
def test_a_unit_becomes_the_end_of_a_column_name(unit: str, suffix: str) -> None:
    assert unit_suffix(unit) == suffix


def test_the_document_of_a_refit_is_that_of_fit_and_says_where_it_belongs() -> None:
    document = refit_document(row().refit, "units", planned("dock"))
    assert {"n", "rejected", "unit", "counting", "alpha", "alpha_se", "alpha_interval", "xmin", "n_tail", "ks_distance",
            "gof", "near_minimum", "resolution", "rivals", "levels", "mean_finite", "variance_finite",
            "events_per_day", "limit", "empirical", "seed", "version"} <= set(document)  # fmt: skip
    assert document["at"] == document["to"] == "2026-12-01T14:00:00Z"
    assert document["from"] == "2026-11-17T14:00:00Z"
    assert document["baseline"] == {
        "source": "plan", "alpha": 2.5, "xmin": 120.0, "n_tail": None, "alpha_now": 2.208, "n_tail_now": 2310,
        "p": 0.00021, "direction": "heavier",
    }  # fmt: skip
    assert document["flags"] == [
        {"rule": "exponent", "direction": "heavier", "p": 0.00021, "words": "heavier than planned"}
    ]


def test_a_failed_refit_has_no_alpha_and_its_reason() -> None:
    failed = decode_refit(refit("d", NOW, None, state="failed", reason="timed out"))
    document = refit_document(failed, "units", None)
    assert (document["alpha"], document["reason"], document["state"]) == (None, "timed out", "failed")
    assert document["baseline"] is None


def test_the_document_of_the_screen_is_json_with_the_same_findings(watch: StoreWatch) -> None:
    document = json.loads(msgspec.json.encode(screen_document(watch.look(), NOW)))
    by_name = {one["stream"]: one for one in document["streams"]}
    assert document["at"] == "2026-12-01T14:05:09Z"
    assert [one["kind"] for one in by_name["north-dock"]["needs_a_look"]] == ["heavier", "limit"]
    alarms = by_name["north-dock"]["alarms"]
    assert [one["rule"] for one in alarms] == ["exponent", "level"]  # not acknowledged first, whatever the priority
    assert [one["alarm"] for one in by_name["north-dock"]["needs_a_look"]] == [one["id"] for one in alarms]
    assert [(one["refits"], one["alarm"]) for one in by_name["east-dock"]["needs_a_look"]] == [(2, None)]
    assert [one["state"] for one in by_name[WIDE]["alarms"]] == ["shelved"]
    watched = by_name["south-dock"]["watch"]
    assert watched["promised_days"] == 450.0
    assert {one["rule"]: one["direction"] for one in watched["readings"]}["exponent"] == "heavier"
    assert {one["rule"] for one in watched["unwatched"]} == {"no events", "rejects", "body"}
    assert by_name["west-dock"]["watch"] is None
    assert by_name["west-dock"]["not_watched"].startswith("Not watched yet: a baseline needs")
    assert by_name["south-dock"]["needs_a_look"] == []
    assert by_name["south-dock"]["age_seconds"] == 4.0
    assert by_name["west-dock"]["refit"] is None
    assert by_name[EVIL]["refit"]["alpha"] == 2.48
    assert len(by_name["north-dock"]["last_refits"]) == 12


def test_the_baseline_of_a_refit_is_the_one_in_force_before_its_end() -> None:
    first = first_window("d")
    later = msgspec.structs.replace(first, id="later", effective_from=NOW, xmin=200.0)
    made: Refit = decode_refit(refit("d", LAST_PANE, HEAVY, against=against(2.45, 2.2, 0.1, n_earlier=5)))
    assert baseline_of(made, [first, later]) == first
    assert baseline_of(made, [later]) is None
    assert baseline_of(made, [msgspec.structs.replace(first, refit=made.id)]) is None
