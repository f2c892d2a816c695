"""A daemon as its own process, on a log that a test writes."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

from storage.audit import canonical_lines
from storage.errors import StoreError
from storage.history import open_reader

ROOT = Path(__file__).resolve().parent.parent.parent
START_SECONDS = 60.0


def command(*arguments: str, folder: Path, text: str | None = None) -> subprocess.CompletedProcess[str]:
    """Run one command to its end."""
    return subprocess.run(
        [sys.executable, "-m", "monitor", *arguments],
        capture_output=True, text=True, cwd=folder, env=environment(), input=text, timeout=240, check=False,
    )  # fmt: skip


def environment() -> dict[str, str]:
    return {**os.environ, "PYTHONPATH": str(ROOT), "PYTHONWARNINGS": "error", "COLUMNS": "100", "NO_COLOR": "1"}


class Daemon:
    """`tailgauge run` in a folder. Started at once; ended by `stop`, `kill`, or at the end of a `with`."""

    def __init__(self, folder: Path, settings: str = "t.toml") -> None:
        self._log = (folder / "daemon.log").open("ab")
        self.process = subprocess.Popen(
            [sys.executable, "-m", "monitor", "run", settings],
            cwd=folder, env=environment(), stdin=subprocess.DEVNULL, stdout=self._log, stderr=self._log,
        )  # fmt: skip

    def __enter__(self) -> Daemon:
        return self

    def __exit__(self, *_: object) -> None:
        if self.process.poll() is None:
            self.kill()
        self._log.close()

    def stop(self, number: int = signal.SIGTERM) -> int:
        """Ask it to end; its exit code."""
        self.process.send_signal(number)
        return self.process.wait(30)

    def kill(self) -> None:
        """kill -9."""
        self.process.kill()
        self.process.wait(30)


def wait_for(condition: Callable[[], bool], seconds: float = START_SECONDS) -> None:
    """Wait until a condition of the store holds; the store may not be there yet."""
    until = time.monotonic() + seconds
    while time.monotonic() < until:
        try:
            if condition():
                return
        except StoreError:
            pass
        time.sleep(0.05)
    raise AssertionError("the daemon did not get there in time")


def lines_read(store: Path) -> int:
    with open_reader(store) as reader:
        return sum(chain.lines for chain in reader.chains())


def export(store: Path) -> list[str]:
    """The canonical export, without the folder that chains are named by."""
    with open_reader(store) as reader:
        return [line.replace(str(store.parent), "") for line in canonical_lines(reader)]
