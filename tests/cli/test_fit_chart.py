"""`tailgauge fit --chart` as a user calls it: the picture beside the answer, what it may replace, exit codes."""

from __future__ import annotations

import json
import os
import stat
import subprocess
import sys
from pathlib import Path
from xml.etree import ElementTree as ET

import numpy as np
import pytest

from monitor.cli.main import run_command


@pytest.fixture
def sizes(tmp_path: Path) -> Path:
    """1000 sizes with a power-law tail (alpha 2.5 above 10)."""
    rng = np.random.default_rng(12)
    body, tail = rng.uniform(1, 10, 600), 10 * (1 - rng.random(400)) ** (-1 / 1.5)
    path = tmp_path / "sizes.txt"
    path.write_text("".join(f"{size!r}\n" for size in np.concatenate((body, tail)).tolist()))
    return path


def texts(path: Path) -> list[str]:
    return [element.text or "" for element in ET.parse(path).iter("{http://www.w3.org/2000/svg}text")]


def test_the_picture_tells_what_the_answer_tells(
    sizes: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    chart = tmp_path / "tail.svg"
    assert run_command(["fit", str(sizes), "--unit", "kg", "--limit", "900", "--chart", str(chart)]) == 0
    said, shown = capsys.readouterr().out, texts(chart)
    alpha = next(line for line in shown if line.startswith("alpha "))
    assert f"{alpha[0].upper()}{alpha[1:]}" in said or alpha in said
    assert shown[0] == said.splitlines()[0]
    assert {"limit 900 kg", "size in kg", "power law"} <= set(shown)
    assert any("95 % band: 400 refits" in line for line in shown)


def test_the_document_is_the_same_with_a_picture(
    sizes: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    arguments = ["fit", str(sizes), "--json", "--replicates", "200"]
    assert run_command(arguments) == 0
    plain = json.loads(capsys.readouterr().out)
    assert run_command([*arguments, "--chart", str(tmp_path / "a.svg")]) == 0
    assert json.loads(capsys.readouterr().out) == plain


def test_the_same_question_gives_the_same_bytes(sizes: Path, tmp_path: Path) -> None:
    charts = [tmp_path / "a.svg", tmp_path / "b.svg"]
    for chart in charts:
        assert run_command(["fit", str(sizes), "--replicates", "200", "--chart", str(chart)]) == 0
    assert charts[0].read_bytes() == charts[1].read_bytes()


def test_no_tail_is_drawn_too(tmp_path: Path) -> None:
    (tmp_path / "few").write_text("1\n2\n3\n")
    chart = tmp_path / "few.svg"
    assert run_command(["fit", str(tmp_path / "few"), "--chart", str(chart)]) == 0
    assert texts(chart)[0].startswith("No usable tail among 3 events")
    (tmp_path / "none").write_text("")
    assert run_command(["fit", str(tmp_path / "none"), "--chart", str(chart)]) == 0
    assert texts(chart)[0].startswith("No usable tail among 0 events")


def test_whole_sizes_and_no_rivals(tmp_path: Path) -> None:
    rng = np.random.default_rng(3)
    (tmp_path / "whole").write_text("".join(f"{size}\n" for size in rng.zipf(2.4, 800).tolist()))
    chart = tmp_path / "w.svg"
    arguments = ["fit", str(tmp_path / "whole"), "--counting", "whole", "--no-rivals", "--replicates", "0"]
    assert run_command([*arguments, "--chart", str(chart)]) == 0
    shown = texts(chart)
    assert "power law" in shown
    assert not {"lognormal", "exponential"} & set(shown)
    assert not any("band" in line for line in shown)


def test_an_svg_is_replaced_and_nothing_else_is(
    sizes: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    chart = tmp_path / "tail.svg"
    quick = ["fit", str(sizes), "--replicates", "0", "--chart"]
    assert run_command([*quick, str(chart)]) == 0
    first = chart.read_bytes()
    assert run_command([*quick, str(chart), "--xmin", "20"]) == 0
    assert chart.read_bytes() != first
    before = sizes.read_bytes()
    other = tmp_path / "orders.csv"
    other.write_text("units\n1\n")
    capsys.readouterr()
    for path in (sizes, other):
        assert run_command([*quick, str(path)]) == 73
        out, err = capsys.readouterr()
        assert "is no SVG; it is not overwritten" in err
        assert out == ""  # refused before any work
    assert sizes.read_bytes() == before
    assert other.read_text() == "units\n1\n"
    assert sorted(path.name for path in tmp_path.iterdir()) == ["orders.csv", "sizes.txt", "tail.svg"]


@pytest.mark.parametrize(
    ("place", "code", "words"),
    [
        ("nowhere/tail.svg", 73, "the folder nowhere does not exist"),
        (".", 73, "is a folder"),
        ("-", 2, "not to standard output"),
        ("/dev/full", 73, "the picture cannot be written (No space left on device)"),
    ],
)
def test_a_wrong_place_gets_a_sentence_and_a_code(
    sizes: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str], place: str, code: int, words: str
) -> None:
    monkeypatch.chdir(sizes.parent)
    assert run_command(["fit", "sizes.txt", "--replicates", "0", "--chart", place]) == code
    err = capsys.readouterr().err
    assert words in err
    assert "Traceback" not in err


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write everywhere")
def test_a_folder_that_takes_nothing(sizes: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = tmp_path / "closed"
    folder.mkdir()
    folder.chmod(stat.S_IRUSR | stat.S_IXUSR)
    assert run_command(["fit", str(sizes), "--replicates", "0", "--chart", str(folder / "t.svg")]) == 73
    assert "Permission denied" in capsys.readouterr().err


def test_the_answer_is_printed_even_when_the_picture_fails(sizes: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run_command(["fit", str(sizes), "--replicates", "0", "--chart", "/dev/full"]) == 73
    assert "alpha " in capsys.readouterr().out.lower()


def test_a_failure_leaves_the_old_picture_whole(
    sizes: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]
) -> None:
    chart = tmp_path / "tail.svg"
    chart.write_text("<svg>old</svg>")

    def full(self: Path, target: Path) -> Path:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(Path, "replace", full)
    assert run_command(["fit", str(sizes), "--replicates", "0", "--chart", str(chart)]) == 73
    assert "No space left" in capsys.readouterr().err
    assert chart.read_text() == "<svg>old</svg>"
    assert sorted(path.name for path in tmp_path.iterdir()) == ["sizes.txt", "tail.svg"]


def test_the_drawing_library_is_loaded_only_for_a_picture(sizes: Path, tmp_path: Path) -> None:
    code = (
        "import sys\n"
        "from monitor.cli.main import run_command\n"
        "assert run_command(sys.argv[1:]) == 0\n"
        "print('loaded', 'matplotlib' in sys.modules, 'matplotlib.pyplot' in sys.modules)\n"
    )
    for extra, expected in (([], "loaded False False"), (["--chart", str(tmp_path / "t.svg")], "loaded True False")):
        command = [sys.executable, "-c", code, "fit", str(sizes), "--replicates", "0", *extra]
        out = subprocess.run(command, capture_output=True, text=True, check=True).stdout
        assert out.splitlines()[-1] == expected
