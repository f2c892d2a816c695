"""Killed at any moment and any system call, with a live writer and rotation: the same store as without.

Compared is the canonical export, so panes, accounts and queued refits alike, not line totals alone.
"""

from __future__ import annotations

import random
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from storage.history import open_reader
from tests.service.daemon import ROOT, environment, export, lines_read, wait_for
from tests.service.test_run import SETTINGS, order_lines

STRACE = shutil.which("strace")


def strace_works() -> bool:
    if STRACE is None:
        return False
    return subprocess.run([STRACE, "-qq", "-e", "trace=none", "true"], capture_output=True, check=False).returncode == 0


needs_strace = pytest.mark.skipif(not strace_works(), reason="strace is not installed, or may not trace here")


def start(
    folder: Path,
    mode: str,
    *,
    block: int = 4 << 20,
    events: int = 50_000,
    apart: bool = False,
    faults: str | None = None,
) -> subprocess.Popen[bytes]:
    """The intake as a process; `faults` is an injection as strace writes it."""
    traced = [] if faults is None else [str(STRACE), "-f", "-qq", "-o", "/dev/null", "-e", faults]
    arguments = [str(folder), mode, str(block), str(events), *(["apart"] if apart else [])]
    return subprocess.Popen(
        [*traced, sys.executable, "-m", "tests.faults.intake_only", *arguments],
        cwd=ROOT, env=environment(), stdin=subprocess.DEVNULL, stdout=subprocess.DEVNULL, stderr=subprocess.PIPE,
    )  # fmt: skip


def finish(folder: Path, **how: int) -> list[str]:
    """Read to the end; the canonical export."""
    process = start(folder, "finish", **how)  # type: ignore[arg-type]
    _, said = process.communicate(timeout=120)
    assert process.returncode == 0, said.decode()
    return export(folder / "orders.db")


def prepared(folder: Path, lines: list[str]) -> Path:
    folder.mkdir(exist_ok=True)
    (folder / "t.toml").write_text(SETTINGS)
    log = folder / "orders.jsonl"
    log.write_text("".join(line + "\n" for line in lines))
    return log


@pytest.fixture(scope="module")
def lines() -> list[str]:
    return order_lines(6000, seed=3)


@pytest.fixture(scope="module")
def expected(lines: list[str], tmp_path_factory: pytest.TempPathFactory) -> list[str]:
    """The undisturbed run."""
    folder = tmp_path_factory.mktemp("undisturbed")
    prepared(folder, lines)
    found = finish(folder)
    assert sum('"pane"' in line for line in found) > 50
    return found


def waiting(folder: Path) -> int:
    with open_reader(folder / "orders.db") as reader:
        return len(reader.refit_jobs())


@needs_strace
@pytest.mark.slow
@pytest.mark.parametrize(
    "fault",
    [f"inject=pwrite64:signal=KILL:when={n}" for n in (1, 4, 9, 17, 30, 51, 77, 120, 200, 350)]
    + [f"inject=fdatasync:signal=KILL:when={n}" for n in (1, 2, 3, 5, 8)]
    + [f"inject=pread64:signal=KILL:when={n}" for n in (2, 12, 25)]
    + ["inject=ftruncate:signal=KILL:when=1", "inject=unlink:signal=KILL:when=1", "inject=rename:signal=KILL:when=1"],
)
def test_a_kill_at_a_system_call_changes_nothing(
    fault: str, tmp_path: Path, lines: list[str], expected: list[str]
) -> None:
    prepared(tmp_path, lines)
    process = start(tmp_path, "finish", block=100_000, events=500, faults=fault)
    process.communicate(timeout=120)
    assert finish(tmp_path, block=70_000, events=700) == expected


@needs_strace
@pytest.mark.slow
@pytest.mark.parametrize("fault", ["inject=pwrite64:error=ENOSPC:when=40..120", "inject=fdatasync:error=EIO:when=3..6"])
def test_a_full_or_failing_disk_loses_nothing(
    fault: str, tmp_path: Path, lines: list[str], expected: list[str]
) -> None:
    prepared(tmp_path, lines)
    process = start(tmp_path, "finish", block=100_000, events=500, faults=fault)
    _, said = process.communicate(timeout=120)
    assert b"Traceback" not in said or process.returncode != 0
    assert b"Nothing is lost" in said or b"writing failed" in said
    assert finish(tmp_path) == expected


@pytest.mark.slow
def test_kills_at_random_moments_with_a_live_writer_and_rotation(
    tmp_path: Path, lines: list[str], expected: list[str]
) -> None:
    """Twelve kills; the log is written piece by piece, half lines included, and rotated twice."""
    rng = random.Random(8)
    log = prepared(tmp_path, [])
    text = "".join(line + "\n" for line in lines)
    pieces, at, rotate_after = [], 0, set[int]()
    while at < len(text):
        end = at + rng.randrange(1, 4000)
        if at > len(text) * (len(rotate_after) + 1) / 3:  # no writer rotates in the middle of a line
            end = text.index("\n", at) + 1
            rotate_after.add(len(pieces))
        pieces.append(text[at:end])
        at = end
    rotations, kills = 0, 0
    process = start(tmp_path, "follow", events=rng.randrange(50, 800))
    for number, piece in enumerate(pieces):
        with log.open("a") as file:
            file.write(piece)
        if number in rotate_after:
            rotations += 1
            log.rename(tmp_path / f"orders.jsonl.{rotations}") if rotations == 1 else _rotate_again(tmp_path, log)
            log.touch()
        time.sleep(rng.random() * 0.02)
        if number % max(1, len(pieces) // 12) == 0:
            if not kills:  # a log rotated before it was ever seen is nobody's to follow
                wait_for(lambda: lines_read(tmp_path / "orders.db") > 0)
            time.sleep(0.8 + rng.random())
            process.kill()
            process.communicate()
            kills += 1
            process = start(tmp_path, "follow", block=rng.randrange(4000, 400_000), events=rng.randrange(50, 800))
    process.kill()
    process.communicate()
    assert kills >= 10
    assert finish(tmp_path) == expected


def _rotate_again(folder: Path, log: Path) -> None:
    (folder / "orders.jsonl.1").rename(folder / "orders.jsonl.2")
    log.rename(folder / "orders.jsonl.1")


@pytest.mark.slow
def test_positions_committed_apart_from_panes_are_found_out(
    tmp_path: Path, lines: list[str], expected: list[str]
) -> None:
    """The negative control: killed between the two commits, events are lost, and the comparison says so."""
    prepared(tmp_path, lines)
    process = start(tmp_path, "follow", block=20_000, events=1, apart=True)
    process.communicate(timeout=60)
    assert process.returncode == -signal.SIGKILL
    assert finish(tmp_path) != expected
