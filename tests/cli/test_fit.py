"""`tailgauge fit` as a user calls it: formats, one document, reasons, exit codes, the same bits for a seed."""

from __future__ import annotations

import json
from pathlib import Path

import numpy as np
import pytest

from monitor.cli.main import run_command


@pytest.fixture
def sizes(tmp_path: Path) -> Path:
    """2000 sizes with a power-law tail (alpha 2.5 above 10)."""
    rng = np.random.default_rng(11)
    body, tail = rng.uniform(1, 10, 1500), 10 * (1 - rng.random(500)) ** (-1 / 1.5)
    path = tmp_path / "sizes.txt"
    path.write_text("".join(f"{size!r}\n" for size in np.concatenate((body, tail)).tolist()))
    return path


def document(capsys: pytest.CaptureFixture[str], *arguments: str) -> dict[str, object]:
    assert run_command(["fit", *arguments, "--json"]) == 0
    out = capsys.readouterr().out
    found = json.loads(out, parse_constant=lambda name: pytest.fail(f"{name} in the document"))
    assert isinstance(found, dict)
    return found


@pytest.fixture
def in_folder(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)


CONTRACT = {
    "n", "rejected", "unit", "counting", "alpha", "alpha_se", "alpha_interval", "xmin", "n_tail", "ks_distance", "gof",
    "near_minimum", "resolution", "rivals", "levels", "mean_finite", "variance_finite", "events_per_day", "limit",
    "empirical", "seed", "version",
}  # fmt: skip


def test_the_document_holds_the_contract(sizes: Path, capsys: pytest.CaptureFixture[str]) -> None:
    found = document(capsys, str(sizes), "--unit", "kg", "--replicates", "300")
    assert set(found) >= CONTRACT
    assert found["n"] == 2000
    assert set(found["gof"]) >= {"p", "p_interval", "replicates", "at_least_as_far", "stopped", "rule_out", "plausible"}  # type: ignore[call-overload]
    assert [set(level) >= {"one_in", "size", "interval"} for level in found["levels"]] == [True]  # type: ignore[attr-defined]


def test_the_same_seed_gives_the_same_bits(sizes: Path, capsys: pytest.CaptureFixture[str]) -> None:
    arguments = (str(sizes), "--replicates", "500")
    first = document(capsys, *arguments, "--seed", "5")
    assert document(capsys, *arguments, "--seed", "5") == first
    assert document(capsys, *arguments, "--seed", "6")["gof"] != first["gof"]


def test_csv_and_json_lines_give_the_same_answer(
    sizes: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    values = sizes.read_text().split()
    (tmp_path / "s.csv").write_text("when,kg\n" + "".join(f"x,{value}\n" for value in values))
    (tmp_path / "s.jsonl").write_text("".join(f'{{"order": {{"kg": {value}}}}}\n' for value in values))
    plain = document(capsys, str(sizes), "--replicates", "200")
    by_name = document(capsys, str(tmp_path / "s.csv"), "--size", "kg", "--replicates", "200")
    nested = document(capsys, str(tmp_path / "s.jsonl"), "--size", "order.kg", "--replicates", "200")
    for key in ("n", "alpha", "xmin", "gof", "levels"):
        assert plain[key] == by_name[key] == nested[key]
    assert by_name["skipped"] == {"header": 1}


def test_a_limit_needs_the_rate(tmp_path: Path, sizes: Path, capsys: pytest.CaptureFixture[str]) -> None:
    rows = [
        f"2026-03-{1 + i // 100:02d}T00:{i % 60:02d}:00Z,{value}\n" for i, value in enumerate(sizes.read_text().split())
    ]
    (tmp_path / "s.csv").write_text("at,kg\n" + "".join(rows))
    arguments = (str(tmp_path / "s.csv"), "--size", "kg", "--limit", "500", "--per", "7d", "--replicates", "300")
    without = document(capsys, *arguments)
    assert without["limit"] is None
    assert any("--time" in warning for warning in without["warnings"])  # type: ignore[attr-defined]
    found = document(capsys, *arguments, "--time", "at")
    assert found["events_per_day"] == pytest.approx(2000 / 19.027, rel=0.01)
    assert found["limit"]["expected"] > 0  # type: ignore[index]


def test_too_few_sizes_are_an_answer_with_a_reason(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "few").write_text("1\n2\n3\n0\n-4\nx\nNaN\n1e999\n\n")
    found = document(capsys, str(tmp_path / "few"))
    assert found["alpha"] is None
    assert found["reason"]
    assert found["rejected"] == {"zero": 1, "negative": 1, "not a number": 1, "not finite": 2}
    assert run_command(["fit", str(tmp_path / "few")]) == 0
    out = capsys.readouterr().out
    assert "not a number: x" in out


def test_an_over_long_line_is_counted_and_not_held(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = tmp_path / "long"
    path.write_bytes(b"".join(b"%d\n" % i for i in range(1, 50)) + b"9" * (9 << 20) + b"\n7\n")
    found = document(capsys, str(path), "--replicates", "200")
    assert found["n"] == 50
    assert found["rejected"] == {"over-long line": 1}


@pytest.mark.parametrize(
    ("arguments", "code", "words"),
    [
        (["nowhere.txt"], 66, "nowhere.txt: cannot be read (No such file or directory)"),
        (["."], 66, "cannot be read (Is a directory)"),
        (["x.csv"], 2, "--size: csv lines need to be told where the size stands"),
        (["x", "--lines", "jsn"], 2, "'jsn' is not one of"),
        (["x", "--per", "month", "--limit", "5"], 2, '--per: "month" is not a span of time'),
        (["x", "--where", "kind"], 2, '--where: "kind" is not FIELD=VALUE'),
        (["x", "--replicates", "-1"], 2, "--replicates"),
    ],
)
def test_mistakes_get_a_sentence_and_a_code(
    in_folder: None, capsys: pytest.CaptureFixture[str], arguments: list[str], code: int, words: str
) -> None:
    Path("x").write_text("1\n")
    Path("x.csv").write_text("a\n1\n")
    assert run_command(["fit", *arguments]) == code
    caught = capsys.readouterr()
    assert words in caught.err
    assert caught.out == ""


def test_a_csv_header_without_the_column_is_bad_data(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    (tmp_path / "x.csv").write_text("order,kilos\n1,2\n")
    assert run_command(["fit", str(tmp_path / "x.csv"), "--size", "kg"]) == 65
    error = capsys.readouterr().err
    assert "kg" in error
    assert "kilos" in error
