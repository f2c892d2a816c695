"""The only reader of time."""

from __future__ import annotations

import time
from typing import Protocol


class Clock(Protocol):
    """now: ns since 1970 UTC on the scale that events are stamped with; monotonic: real seconds, for waiting."""

    def now(self) -> int:
        """The moment, ns since 1970 UTC."""
        ...

    def of_file(self, modified: int) -> int:
        """A file's modification time (ns, real) on this clock's scale."""
        ...

    def monotonic(self) -> float:
        """Real seconds from some fixed moment."""
        ...

    def sleep(self, seconds: float) -> None:
        """Wait so many real seconds."""
        ...


class SystemClock:
    """The machine's clock."""

    def now(self) -> int:
        """The moment, ns since 1970 UTC."""
        return time.time_ns()

    def of_file(self, modified: int) -> int:
        """A file's modification time is on the same scale."""
        return modified

    def monotonic(self) -> float:
        """Real seconds from some fixed moment."""
        return time.monotonic()

    def sleep(self, seconds: float) -> None:
        """Wait so many seconds."""
        time.sleep(seconds)


class ScaledClock(SystemClock):
    """A clock that started at `start` (ns) when the real one showed `real_start`, and runs `speed` times as fast."""

    def __init__(self, start: int, real_start: int, speed: float) -> None:
        self.start = start
        self.real_start = real_start
        self.speed = speed

    def now(self) -> int:
        """The moment on the scaled clock."""
        return self.of_file(time.time_ns())

    def of_file(self, modified: int) -> int:
        """A real moment on the scaled clock."""
        return self.start + int((modified - self.real_start) * self.speed)
