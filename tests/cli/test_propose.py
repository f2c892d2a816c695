"""`tailgauge propose` as a user runs it: from an unknown log to a judged window."""

from __future__ import annotations

import gzip
import json
from pathlib import Path

import pytest

from monitor.cli.propose import HEAD, PIECES, SPREAD
from storage.history import open_reader
from tests.propose.logs import LOGS, log
from tests.service.daemon import command, lines_read


@pytest.mark.slow
@pytest.mark.parametrize("kind", LOGS)
def test_what_is_printed_can_be_checked_and_run(tmp_path: Path, kind: str) -> None:
    (tmp_path / "events.log").write_bytes(log(kind, 400))
    done = command("propose", "events.log", folder=tmp_path)
    assert done.returncode == 0, done.stderr
    assert "next: tailgauge settings tailgauge.toml" in done.stderr
    (tmp_path / "tailgauge.toml").write_text(done.stdout)
    assert command("settings", "tailgauge.toml", folder=tmp_path).returncode == 0
    done = command("run", "tailgauge.toml", "--finish", folder=tmp_path)
    assert done.returncode == 0, done.stderr
    store = tmp_path / "events.db"
    assert lines_read(store) == 400 + (kind == "csv")
    with open_reader(store) as reader:
        (chain,) = reader.chains()
        assert chain.events == 400
        assert not chain.rejected


def test_files_of_many_days_become_one_pattern_and_json_says_the_same(tmp_path: Path) -> None:
    for day in (1, 2, 3):
        (tmp_path / f"orders-2026-11-0{day}.jsonl").write_bytes(log("json", 300, seed=day))
    names = [f"orders-2026-11-0{day}.jsonl" for day in (1, 2, 3)]
    document = json.loads(command("propose", *names, "--json", folder=tmp_path).stdout)
    assert document["follow"] == ["orders-*.jsonl"]
    assert document["settings"] == command("propose", *names, folder=tmp_path).stdout
    assert json.loads(command("propose", *names[:2], "--json", folder=tmp_path).stdout)["follow"] == names[:2]


def test_only_a_bounded_sample_is_read(tmp_path: Path) -> None:
    with (tmp_path / "big.jsonl").open("wb") as file:
        file.write(log("json", 1000))
        file.truncate(1 << 30)  # a sparse file: reading all of it would take a gigabyte of zeros
        file.seek(1 << 30)
        file.write(b"\n" + log("json", 1000))
    done = command("propose", "big.jsonl", "--json", folder=tmp_path)
    assert done.returncode == 0, done.stderr
    assert json.loads(done.stdout)["sampled_bytes"] <= HEAD + SPREAD * PIECES


def test_standard_input_and_compressed_files(tmp_path: Path) -> None:
    done = command("propose", "-", folder=tmp_path, text=log("pairs", 300).decode())
    assert 'read = "-"' in done.stdout
    (tmp_path / "a.csv.gz").write_bytes(gzip.compress(log("csv", 300)))
    assert json.loads(command("propose", "a.csv.gz", "--json", folder=tmp_path).stdout)["format"]["size"] == "amount"


@pytest.mark.parametrize(
    ("arguments", "code", "words"),
    [
        (("nothing.log",), 66, "no such file"),
        (("folder",), 66, "is a folder"),
        (("words.txt",), 65, "no form with a number"),
        (("-", "words.txt"), 2, "cannot be mixed"),
        (("broken.gz",), 66, "cannot be read"),
    ],
)
def test_mistakes_get_a_sentence_and_a_code(tmp_path: Path, arguments: tuple[str, ...], code: int, words: str) -> None:
    (tmp_path / "folder").mkdir()
    (tmp_path / "words.txt").write_text("hello\nworld\n")
    (tmp_path / "broken.gz").write_bytes(gzip.compress(b"1\n2\n" * 500)[:20])
    done = command("propose", *arguments, folder=tmp_path)
    assert (done.returncode, done.stdout) == (code, "")
    assert words in done.stderr
    assert "Traceback" not in done.stderr
