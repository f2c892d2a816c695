"""The daemon's own log: one line an occurrence on standard error, a repeated trouble at most once a minute."""

from __future__ import annotations

import sys
from datetime import UTC, datetime
from typing import TextIO

from monitor.service.clock import Clock

LEVELS = ("debug", "info", "warning", "error")
REPEAT_AFTER = 60.0
"""Real seconds before the same trouble is told again."""


class Log:
    """Writes `time level message`, the time in UTC."""

    def __init__(self, clock: Clock, level: str = "info", stream: TextIO | None = None) -> None:
        self._clock = clock
        self._least = LEVELS.index(level)
        self._stream = stream
        self._told: dict[str, tuple[float, int]] = {}

    def debug(self, message: str) -> None:
        """What only a developer needs."""
        self._write("debug", message)

    def info(self, message: str) -> None:
        """What happened."""
        self._write("info", message)

    def warning(self, message: str) -> None:
        """A trouble that the daemon lives with."""
        self._write("warning", message)

    def error(self, message: str) -> None:
        """A trouble that somebody must mend."""
        self._write("error", message)

    def _write(self, level: str, message: str) -> None:
        if LEVELS.index(level) < self._least:
            return
        suffix = ""
        if level in ("warning", "error"):
            last, held = self._told.get(message, (-REPEAT_AFTER, 0))
            real = self._clock.monotonic()
            if real - last < REPEAT_AFTER:
                self._told[message] = (last, held + 1)
                return
            if held:
                suffix = f" (and {held} more times since)"
            self._told[message] = (real, 0)
        stamp = datetime.fromtimestamp(self._clock.now() / 1e9, UTC).strftime("%Y-%m-%dT%H:%M:%SZ")
        safe = "".join(char if char.isprintable() else repr(char)[1:-1] for char in message)
        print(f"{stamp} {level} {safe}{suffix}", file=self._stream or sys.stderr, flush=True)
