"""The daemon as a user runs it: a live log, rotation, kill -9, restart; exact counts at the end."""

from __future__ import annotations

import json
import os
import random
import signal
import sqlite3
from pathlib import Path

import pytest

from storage.history import open_reader
from tests.service.daemon import Daemon, command, export, lines_read, wait_for

SETTINGS = """
store = "orders.db"
[feed.orders]
follow = ["orders.jsonl"]
lines = "json"
size = "units"
time = "placed_at"
stream = "dock"
[watch]
pane = "10m"
window = "1h"
lateness = "30s"
replicates = 200
baseline_tail = 100
"""


def order_lines(count: int, seed: int = 1) -> list[str]:
    """Orders at two docks, a little out of order, one line in 100 spoilt in one of six ways."""
    rng = random.Random(seed)
    spoilt = ['{"units": "x"}', "{", "", '{"placed_at": "2026-03-02T00:00:00Z"}', '{"units": -1}', '{"units": NaN}']
    lines = []
    for i in range(count):
        second = 4 * i + rng.randrange(-15, 15) + 60
        stamp = f"2026-03-02T{second // 3600 % 24:02d}:{second // 60 % 60:02d}:{second % 60:02d}Z"
        dock, units = rng.choice(["north", "south"]), round(10 * rng.paretovariate(1.4), 1)
        good = f'{{"placed_at": "{stamp}", "units": {units}, "dock": "{dock}"}}'
        lines.append(rng.choice(spoilt) if rng.random() < 0.01 else good)
    return lines


def fresh(folder: Path, settings: str = SETTINGS) -> Path:
    folder.mkdir(exist_ok=True)
    (folder / "t.toml").write_text(settings)
    return folder / "orders.jsonl"


def test_exact_counts_after_rotation_kill_and_restart(tmp_path: Path) -> None:
    lines = order_lines(4000)
    whole, live = tmp_path / "whole", tmp_path / "live"
    fresh(whole).write_text("\n".join(lines) + "\n")
    done = command("run", "t.toml", "--finish", folder=whole)
    assert done.returncode == 0, done.stderr
    expected = export(whole / "orders.db")
    assert sum('"refit"' in line for line in expected) > 10

    log = fresh(live)
    store = live / "orders.db"
    with log.open("a") as file:
        file.write("\n".join(lines[:1500]) + "\n" + lines[1500][:20])  # a partial last line
    with Daemon(live) as daemon:
        wait_for(lambda: lines_read(store) == 1500)
        with log.open("a") as file:
            file.write(lines[1500][20:] + "\n" + "\n".join(lines[1501:2000]) + "\n")
        daemon.kill()
    log.rename(live / "orders.jsonl.1")
    log.write_text("\n".join(lines[2000:3000]) + "\n")
    with Daemon(live) as daemon:
        wait_for(lambda: lines_read(store) >= 2500)
        daemon.kill()
    with log.open("a") as file:
        file.write("\n".join(lines[3000:]) + "\n")
    with Daemon(live) as daemon:
        wait_for(lambda: lines_read(store) == 4000)
        assert daemon.stop(signal.SIGTERM) == 0
    assert command("run", "t.toml", "--finish", folder=live).returncode == 0
    assert export(store) == expected


def test_every_line_is_accounted_for(tmp_path: Path) -> None:
    lines = order_lines(1000)
    fresh(tmp_path).write_text("\n".join(lines) + "\n")
    assert command("run", "t.toml", "--finish", folder=tmp_path).returncode == 0
    with open_reader(tmp_path / "orders.db") as reader:
        (chain,) = reader.chains()
        assert chain.lines == 1000 == chain.events + sum(chain.skipped.values()) + sum(chain.rejected.values())
        assert chain.skipped == {"blank": lines.count("")}
        assert sum(stream.events for stream in reader.streams()) == chain.events
        samples = reader.rejected_samples()
        text = "\n".join(lines).encode()
        assert samples
        assert all(text[sample.position :].startswith(sample.text) for sample in samples)


def test_history_speaks_the_contract(tmp_path: Path) -> None:
    fresh(tmp_path).write_text("\n".join(order_lines(3000)) + "\n")
    assert command("run", "t.toml", "--finish", folder=tmp_path).returncode == 0
    done = command("history", "--in", "t.toml", "--json", folder=tmp_path)
    assert done.returncode == 0
    refits = json.loads(done.stdout)
    assert len(refits) > 10
    wanted = {
        "id",
        "stream",
        "at",
        "from",
        "to",
        "panes",
        "baseline",
        "n",
        "alpha",
        "xmin",
        "n_tail",
        "ks_distance",
        "gof",
    }
    assert all(wanted <= set(refit) for refit in refits)
    assert [refit["at"] for refit in refits] == sorted(refit["at"] for refit in refits)
    frame = command("screen", "--once", "--in", "t.toml", folder=tmp_path)
    assert frame.returncode == 0
    assert "north" in frame.stdout
    assert "south" in frame.stdout


def test_a_plan_is_the_baseline_from_the_first_pane_on(tmp_path: Path) -> None:
    plan = "[stream.north.plan]\nalpha = 3.4\nxmin = 10\n"
    fresh(tmp_path, SETTINGS + plan).write_text("\n".join(order_lines(2000)) + "\n")
    assert command("run", "t.toml", "--finish", folder=tmp_path).returncode == 0
    with open_reader(tmp_path / "orders.db") as reader:
        first = reader.refits("north")[0]
        assert first.comparison is not None
        assert json.loads(first.comparison)["alpha_earlier"] == 3.4
        flagged = [refit for refit in reader.refits("north") if '"exponent"' in refit.flags]
        assert json.loads(flagged[-1].flags)[0]["direction"] == "heavier"  # the orders have alpha 2.4
        assert [(held.source, held.alpha) for held in reader.baselines("north")] == [("plan", 3.4)]
        assert [held.source for held in reader.baselines("south")] == ["first window"]


def test_a_second_daemon_is_refused(tmp_path: Path) -> None:
    fresh(tmp_path).write_text("\n".join(order_lines(100)) + "\n")
    with Daemon(tmp_path) as daemon:
        wait_for(lambda: lines_read(tmp_path / "orders.db") == 100)
        second = command("run", "t.toml", folder=tmp_path)
        assert second.returncode == 75
        assert "another daemon" in second.stderr
        assert daemon.stop(signal.SIGINT) == 0


@pytest.mark.parametrize(
    ("old", "new", "code", "words"),
    [
        ("replicates = 200", "replicate = 200", 78, 'watch.replicate: unknown key. Did you mean "replicates"?'),
        ("replicates = 200", 'replicates = "many"', 78, "watch.replicates: expected `int`, got `str`"),
        ('pane = "10m"', 'pane = "7h"', 78, 'watch.pane: "7h" does not divide a day'),
        ('lines = "json"', 'lines = "jsn"', 78, "feed.orders.lines: invalid enum value 'jsn'"),
        ('size = "units"', "", 78, "feed.orders.size"),
        ("[watch]", "[watch", 78, "not valid TOML"),
        ('follow = ["orders.jsonl"]', 'follow = ["nothing-*.jsonl"]', 66, "no file matches nothing-*.jsonl"),
        ('store = "orders.db"', 'store = "no/such/folder.db"', 66, "there is no such folder"),
        ('store = "orders.db"', 'store = "t.toml"', 65, "not a Tailgauge store"),
    ],
)  # fmt: skip
def test_mistakes_get_a_sentence_and_a_code(tmp_path: Path, old: str, new: str, code: int, words: str) -> None:
    assert old in SETTINGS
    fresh(tmp_path, SETTINGS.replace(old, new)).write_text("")
    done = command("run", "t.toml", "--finish", folder=tmp_path)
    assert (done.returncode, done.stdout) == (code, "")
    assert words in done.stderr
    assert "Traceback" not in done.stderr
    assert (tmp_path / "t.toml").read_text() == SETTINGS.replace(old, new)


def test_an_empty_store_file_is_refused_and_left_alone(tmp_path: Path) -> None:
    fresh(tmp_path).write_text("")
    (tmp_path / "orders.db").touch()
    done = command("run", "t.toml", "--finish", folder=tmp_path)
    assert done.returncode == 65
    assert "empty" in done.stderr
    assert (tmp_path / "orders.db").stat().st_size == 0


def test_standard_input_is_a_feed(tmp_path: Path) -> None:
    settings = SETTINGS.replace('follow = ["orders.jsonl"]', 'read = "-"')
    fresh(tmp_path, settings)
    lines = order_lines(500)
    done = command("run", "t.toml", "--finish", folder=tmp_path, text="\n".join(lines) + "\n")
    assert done.returncode == 0, done.stderr
    assert lines_read(tmp_path / "orders.db") == 500


def test_the_store_is_readable_by_its_owner_only(tmp_path: Path) -> None:
    fresh(tmp_path).write_text("\n".join(order_lines(10)) + "\n")
    assert command("run", "t.toml", "--finish", folder=tmp_path).returncode == 0
    assert os.stat(tmp_path / "orders.db").st_mode & 0o077 == 0


def test_settings_are_reread_on_hangup_and_bad_ones_refused(tmp_path: Path) -> None:
    log = fresh(tmp_path)
    log.write_text("\n".join(order_lines(300)) + "\n")
    said = tmp_path / "daemon.log"
    with Daemon(tmp_path) as daemon:
        wait_for(lambda: lines_read(tmp_path / "orders.db") == 300)
        (tmp_path / "t.toml").write_text(SETTINGS.replace("replicates = 200", "replicates = 0.5"))
        daemon.process.send_signal(signal.SIGHUP)
        wait_for(lambda: "watch.replicates" in said.read_text())
        assert "the old ones stay in force" in said.read_text()
        (tmp_path / "t.toml").write_text(SETTINGS.replace("replicates = 200", "replicates = 300"))
        daemon.process.send_signal(signal.SIGHUP)
        wait_for(lambda: "settings changed" in said.read_text())
        with log.open("a") as file:
            file.write("\n".join(order_lines(600)[300:]) + "\n")
        wait_for(lambda: lines_read(tmp_path / "orders.db") == 600)
        assert daemon.stop() == 0
    with open_reader(tmp_path / "orders.db") as reader:
        assert "replicates = 300" in (reader.settings_text() or "")


def test_check_finds_a_changed_bit(tmp_path: Path) -> None:
    fresh(tmp_path).write_text("\n".join(order_lines(1500)) + "\n")
    assert command("run", "t.toml", "--finish", folder=tmp_path).returncode == 0
    good = command("check", "--in", "t.toml", "--backup", "copy.db", folder=tmp_path)
    assert (good.returncode, good.stderr) == (0, "")
    assert export(tmp_path / "copy.db") == export(tmp_path / "orders.db")
    again = command("check", "--in", "t.toml", "--backup", "copy.db", folder=tmp_path)
    assert again.returncode == 73
    connection = sqlite3.connect(tmp_path / "copy.db")
    blob = bytearray(connection.execute("select content from pane limit 1").fetchone()[0])
    blob[90] ^= 1
    connection.execute("update pane set content = ? where rowid = (select min(rowid) from pane)", [bytes(blob)])
    connection.execute("update chain set lines = lines + 1")
    connection.commit()
    connection.close()
    bad = command("check", "--in", "copy.db", "--json", folder=tmp_path)
    assert bad.returncode == 1
    faults = {finding["what"]: finding["faults"] for finding in json.loads(bad.stdout)["findings"]}
    assert len(faults["sealed panes"]) == 1
    assert "checksum" in faults["sealed panes"][0]
    assert "1 of 1501 lines are not accounted for" in faults["accounts and positions of chains"][0]
