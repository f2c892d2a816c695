"""The demonstration: writer, daemon and screen as separate processes on one accelerated clock, then the summary."""

from __future__ import annotations

import os
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path

from rich.console import Console

from demo.settings import SETTINGS
from demo.summary import announced, summary
from demo.warehouse import DAY, OPENING, script
from demo.writer import LOG
from monitor.cli.live import run_live
from monitor.cli.screen import can_redraw, look_of, one_frame, still_look
from monitor.cli.watching import StoreWatch
from monitor.errors import OutputError
from monitor.render.safe import plain
from monitor.render.times import moment_text
from monitor.service.clock import ScaledClock
from monitor.tail.judge import compile_everything
from storage.history import open_reader

FULL_SECONDS, FAST_SECONDS = 90.0, 15.0
DAYS = 10.0
LEAD = 2.5
"""Real seconds that writer and daemon get to start."""
PATIENCE = 20.0
"""Real seconds that the daemon gets to judge what is left after the last line."""


@dataclass(frozen=True, slots=True)
class Story:
    """How the story is told: real seconds, seed, folder (None: a temporary one)."""

    seconds: float
    seed: int
    folder: Path | None


def tell(story: Story, console: Console) -> None:
    """Run the story from start to end. Raises OutputError when the folder cannot be used."""
    folder = _folder(story.folder)
    settings = folder / "tailgauge.toml"
    settings.write_text(SETTINGS, encoding="utf-8")
    _prepare(console)
    speed = DAYS * DAY / (story.seconds * 1e9)
    real_start = time.time_ns() + int(LEAD * 1e9)
    clock = ScaledClock(OPENING, real_start, speed)
    console.print(f"An invented warehouse: {DAYS:g} days of orders at four docks in {story.seconds:g} seconds.")
    console.print(f"Everything is in {folder}")
    arguments = [str(real_start), str(speed)]
    writer = [str(folder / "logs"), str(story.seed), str(DAYS), *arguments]
    with (
        _process("demo.writer", writer, folder) as writing,
        _process("demo.daemon", [str(settings), *arguments], folder),
    ):
        _await_store(folder / "orders.db")
        over = _Over(writing, folder / "orders.db")
        if can_redraw(console):
            with StoreWatch(settings) as watch:
                run_live(watch, console, look_of(console), None, clock=clock, over=over)
        else:
            _tell_alarms(folder / "orders.db", console, over)
    _close(settings, console)


def _folder(wanted: Path | None) -> Path:
    if wanted is None:
        folder = Path(tempfile.mkdtemp(prefix="tailgauge-demo-"))
    else:
        folder = wanted
        if (folder / "orders.db").exists() or (folder / "logs" / LOG).exists():
            raise OutputError(f"{folder}: holds an earlier story. Name a new folder with --dir.")
    try:
        (folder / "logs").mkdir(parents=True, exist_ok=True)
        (folder / "logs" / LOG).touch()
    except OSError as error:
        raise OutputError(f"{folder}: cannot be used ({error.strerror}). Name another folder with --dir.") from None
    return folder


def _prepare(console: Console) -> None:
    """Compile before the story's clock starts, so that its pace does not depend on the first use."""
    started = time.monotonic()
    with console.status("Preparing the tail engine; the first time this compiles it, for about half a minute."):
        compile_everything()
    if not console.is_terminal and time.monotonic() - started > 5:
        console.print("Compiled the tail engine, for this and later runs.")


@contextmanager
def _process(module: str, arguments: list[str], folder: Path) -> Iterator[subprocess.Popen[bytes]]:
    """A process of ours whose messages go to a file in the folder; ended by SIGTERM."""
    with (folder / f"{module.rpartition('.')[2]}.log").open("ab") as log:
        process = subprocess.Popen(
            [sys.executable, "-m", module, *arguments],
            stdin=subprocess.DEVNULL, stdout=log, stderr=log, env=_environment(), start_new_session=True,
        )  # fmt: skip
        try:
            yield process
        finally:
            process.terminate()
            try:
                process.wait(15.0)
            except subprocess.TimeoutExpired:
                process.kill()
                process.wait()


def _environment() -> dict[str, str]:
    """The child finds the package where this process found it."""
    package = str(Path(__file__).resolve().parent.parent)
    known = os.environ.get("PYTHONPATH")
    return {**os.environ, "PYTHONPATH": f"{package}{os.pathsep}{known}" if known else package}


def _await_store(store: Path) -> None:
    """The daemon makes the store within a second or two."""
    until = time.monotonic() + 30.0
    while time.monotonic() < until:
        if store.exists() and _has_settings(store):
            return
        time.sleep(0.1)
    raise OutputError(f"{store}: the daemon did not start. See daemon.log beside it.")


def _has_settings(store: Path) -> bool:
    with open_reader(store) as reader:
        return reader.settings_text() is not None


class _Over:
    """The story is over when the writer has ended and the daemon has judged what it could."""

    def __init__(self, writing: subprocess.Popen[bytes], store: Path) -> None:
        self._writing = writing
        self._store = store
        self._ended: float | None = None
        self._quiet = 0

    def __call__(self) -> bool:
        if self._writing.poll() is None:
            return False
        if self._ended is None:
            self._ended = time.monotonic()
        with open_reader(self._store) as reader:
            read = sum(chain.lines for chain in reader.chains())
            self._quiet = (
                self._quiet + 1 if read >= (_written(self._store.parent) or 0) and not reader.refit_jobs() else 0
            )
        return self._quiet >= 2 or time.monotonic() - self._ended > PATIENCE


def _written(folder: Path) -> int | None:
    try:
        return int((folder / "logs" / "written").read_text(encoding="utf-8"))
    except OSError:
        return None


def _tell_alarms(store: Path, console: Console, over: Callable[[], bool]) -> None:
    """Without a terminal to paint on: each alarm's message, when it is raised."""
    told: set[str] = set()
    going_on = True
    while going_on:
        going_on = not over()  # what is stored by the end is told as well
        with open_reader(store) as reader:
            for alarm in announced(reader):
                if alarm.id not in told:
                    told.add(alarm.id)
                    line = f"{moment_text(alarm.raised_at, 'UTC')}  {plain(alarm.message)}"
                    console.print(line, markup=False, highlight=False)
        time.sleep(0.5)


def _close(settings: Path, console: Console) -> None:
    folder = settings.parent
    if not can_redraw(console):
        with StoreWatch(settings) as watch:
            clock = ScaledClock(OPENING + int(DAYS * DAY), time.time_ns(), 1.0)
            console.print(one_frame(watch, still_look(console), None, clock.now()), markup=False, highlight=False)
    with open_reader(folder / "orders.db") as reader:
        for line in summary(reader, script(DAYS), _written(folder)):
            console.print(line, markup=False, highlight=False)
    console.print("Look further:", markup=False)
    for command in ("screen", "alarms", "history --last 5", "screen --stream north"):
        console.print(f"  tailgauge {command} --in {settings}", markup=False, highlight=False, soft_wrap=True)
