"""The two commands that look at a store: what they print, where, and how they end."""

from __future__ import annotations

import json
import os
import sqlite3
from pathlib import Path

import pytest

from monitor.cli.main import run_command
from monitor.cli.reading import moment
from monitor.cli.watching import StoreWatch
from monitor.errors import MonitorError, UsageError
from storage.errors import StoreError
from tests.stores import (
    EVIL,
    HOUR,
    NOW,
    chain,
    first_window,
    make,
    quiet_refits,
    settings_fact,
    stream,
    warehouse,
)

SECOND = 1_000_000_000


@pytest.fixture(scope="module")
def store(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return warehouse(tmp_path_factory.mktemp("store") / "orders.db")


def run(capsys: pytest.CaptureFixture[str], *arguments: object) -> tuple[int, str, str]:
    code = run_command([str(argument) for argument in arguments])
    printed = capsys.readouterr()
    return code, printed.out, printed.err


def test_history_as_json_has_every_refit_newest_last(store: Path, capsys: pytest.CaptureFixture[str]) -> None:
    code, out, err = run(capsys, "history", "--in", store, "--json")
    found = json.loads(out)
    assert (code, err, len(found)) == (0, "", 12 * 4 + 5)
    assert [one["at"] for one in found] == sorted(one["at"] for one in found)
    assert {one["stream"] for one in found} >= {"north-dock", EVIL}


def test_history_of_one_stream_between_times(store: Path, capsys: pytest.CaptureFixture[str]) -> None:
    between = ("--from", "2026-12-01 12:00", "--to", "2026-12-01T13:00:00Z")
    code, out, _ = run(capsys, "history", "--in", store, "--stream", "north-dock", *between, "--json")
    assert code == 0
    assert [one["at"] for one in json.loads(out)] == ["2026-12-01T12:00:00Z", "2026-12-01T13:00:00Z"]


def test_history_as_table_fits_without_a_terminal(store: Path, capsys: pytest.CaptureFixture[str]) -> None:
    code, out, _ = run(capsys, "history", "--in", store, "--last", 1)
    lines = out.splitlines()
    assert code == 0
    assert len(lines) == 6
    assert max(len(line) for line in lines) <= 80
    assert any("power law ruled out" in line for line in lines)


def test_history_as_csv(store: Path, capsys: pytest.CaptureFixture[str]) -> None:
    code, out, _ = run(capsys, "history", "--in", store, "--last", 2, "--csv")
    assert code == 0
    assert "xmin_units" in out.splitlines()[0]
    assert len(out.splitlines()) == 11


def test_an_empty_history_is_said_in_words_and_as_an_empty_list(
    tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    with make(tmp_path / "new.db") as store:
        store.commit([settings_fact(), chain()])
    assert run(capsys, "history", "--in", tmp_path / "new.db") == (0, "No refits here yet.\n", "")
    assert run(capsys, "history", "--in", tmp_path / "new.db", "--json") == (0, "[]\n", "")


@pytest.mark.parametrize("command", ["history", "screen"])
def test_exit_codes_of_the_contract(
    command: str, store: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    code, out, err = run(capsys, command, "--in", tmp_path / "none.db")
    assert (code, out) == (66, "")
    assert "none.db: no such file" in err
    code, _, err = run(capsys, command, "--in", store, "--stream", "nowhere\x1b[2J")
    assert code == 66
    assert 'no stream "nowhere\\x1b[2J" in this store; it holds: ' in err
    foreign = tmp_path / "foreign.db"
    with sqlite3.connect(foreign) as other:
        other.execute("create table t (a)")
    assert run(capsys, command, "--in", foreign)[0] == 65
    assert run(capsys, command, "--nonsense")[0] == 2
    bare = tmp_path / "bare.db"
    make(bare).close()
    code, _, err = run(capsys, command, "--in", bare)
    assert code == 66
    assert "holds no settings yet" in err


def test_history_refuses_what_is_no_time_and_two_forms_at_once(store: Path, capsys: pytest.CaptureFixture[str]) -> None:
    code, _, err = run(capsys, "history", "--in", store, "--from", "yesterday")
    assert code == 2
    assert '"yesterday" is no time' in err
    assert run(capsys, "history", "--in", store, "--json", "--csv")[0] == 2


def test_a_refit_that_was_tampered_with_is_named(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = warehouse(tmp_path / "orders.db")
    with sqlite3.connect(path) as other:
        other.execute("update refit set judgement = '{\"n\":\"many\"}' where stream = 'south-dock'")
    for command in (["history"], ["screen", "--once"]):
        code, _, err = run(capsys, *command, "--in", path)
        assert code == 65
        assert "cannot be read" in err


def test_times_are_local_to_the_plan_and_dates_are_whole_days() -> None:
    lisbon = "Europe/Lisbon"
    assert moment("2026-12-01T14:05:09Z", lisbon) == NOW
    assert moment("2026-12-01 14:05:09", lisbon) == NOW
    assert moment("2026-12-01T15:05:09+01:00", lisbon) == NOW
    assert moment("2026-07-01 01:00", lisbon) == moment("2026-07-01T00:00:00Z", lisbon)  # summer time
    start, end = moment("2026-12-01", lisbon), moment("2026-12-01", lisbon, last=True)
    assert start is not None
    assert end is not None
    assert (start, end) == (NOW // (24 * HOUR) * 24 * HOUR, start + 24 * HOUR - 1000)
    assert moment(None, lisbon) is None
    for wrong in ("", "1.12.2026", "2026-13-01", "0001-01-01T00:00:00+14:00"):
        with pytest.raises(UsageError, match="is no time"):
            moment(wrong, lisbon)


def test_the_screen_prints_one_frame_without_a_terminal(store: Path, capsys: pytest.CaptureFixture[str]) -> None:
    code, out, _ = run(capsys, "screen", "--in", store)
    assert code == 0
    assert "2 of 6 streams need a look: 3 alarms" in out
    assert "north-dock: tail heavier since about 12:00 WET" in out
    assert "\x1b" not in out
    code, out, _ = run(capsys, "screen", "--in", store, "--once", "--stream", "east-dock")
    assert code == 0
    assert "A power law does not describe the tail" in out
    assert "Share of events at or above a size" in out


def test_the_screen_as_json_has_the_streams_asked_for(store: Path, capsys: pytest.CaptureFixture[str]) -> None:
    code, out, _ = run(capsys, "screen", "--in", store, "--json", "--stream", "east-dock")
    document = json.loads(out)
    assert code == 0
    assert [one["stream"] for one in document["streams"]] == ["east-dock"]
    assert document["streams"][0]["needs_a_look"][0]["kind"] == "fit"


def test_nothing_is_read_again_while_nothing_was_committed(tmp_path: Path) -> None:
    path = tmp_path / "orders.db"
    with make(path) as store:
        store.commit([settings_fact(), chain(), stream("dock"), first_window("dock"), *quiet_refits("dock", 3)])
        with StoreWatch(path) as watch:
            first = watch.look()
            assert watch.look() is first
            store.commit([stream("dock", age=0, events=90_481)])
            watch._next_read = 0.0  # the rest after the first read is over
            second = watch.look()
            assert second.streams[0].state.events == 90_481
            # The refits did not change, and are not decoded again.
            assert second.streams[0].refits is first.streams[0].refits


def test_a_watched_store_may_be_replaced_and_may_vanish(tmp_path: Path) -> None:
    path, other = tmp_path / "orders.db", tmp_path / "other.db"
    for place, name in ((path, "dock"), (other, "quay")):
        with make(place) as store:
            store.commit([settings_fact(), chain(), stream(name)])
    with StoreWatch(path) as watch:
        assert [one.name for one in watch.look().streams] == ["dock"]
        os.replace(other, path)
        assert [one.name for one in watch.look().streams] == ["quay"]
        path.unlink()
        with pytest.raises((StoreError, MonitorError), match="no such file"):
            watch.look()
        with make(path) as store:
            store.commit([settings_fact(), chain(), stream("pier")])
        assert [one.name for one in watch.look().streams] == ["pier"]
