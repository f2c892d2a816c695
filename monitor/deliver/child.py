"""A child process with text on its standard input, a bounded answer, and a time-out; polled, never waited for."""

from __future__ import annotations

import contextlib
import os
import signal
import subprocess
from collections.abc import Mapping, Sequence
from pathlib import Path

import msgspec

MOST_OUTPUT = 4096
"""Bytes of output kept: the last ones."""
_READ = 1 << 16
_READS_A_POLL = 64
"""A program that writes without end must not keep the caller in one poll."""


class ChildEnd(msgspec.Struct, frozen=True, kw_only=True):
    """How a child ended: its exit code (negative: the signal), or None when its time was up; the end of its output."""

    code: int | None
    output: bytes


class Child:
    """One child process, in a session of its own, so that its own children can be ended with it.

    Raises OSError when it cannot be started.
    """

    def __init__(
        self,
        arguments: Sequence[str],
        text: bytes,
        *,
        deadline: float,
        folder: Path | None = None,
        environment: Mapping[str, str] | None = None,
    ) -> None:
        self._process = subprocess.Popen(
            list(arguments),
            stdin=subprocess.PIPE,
            stdout=subprocess.PIPE,
            stderr=subprocess.STDOUT,
            cwd=folder,
            env=environment,
            start_new_session=True,
            bufsize=0,
        )
        self._deadline = deadline
        self._left = memoryview(text)
        self._output = bytearray()
        assert self._process.stdin is not None
        assert self._process.stdout is not None
        self._in, self._out = self._process.stdin, self._process.stdout
        os.set_blocking(self._in.fileno(), False)
        os.set_blocking(self._out.fileno(), False)
        self._write()  # what fits into the pipe; a short text is all there before the first poll

    def poll(self, real: float) -> ChildEnd | None:
        """How it ended, if it has; `real` is the caller's monotonic clock in seconds."""
        self._write()
        self._read()
        code = self._process.poll()
        if code is None and real < self._deadline:
            return None
        if code is None:
            self.stop()
            return ChildEnd(code=None, output=bytes(self._output))
        # A grandchild may hold the pipe open: what is there is taken, its end is not waited for.
        self._read()
        self._close()
        return ChildEnd(code=code, output=bytes(self._output))

    def _write(self) -> None:
        if self._in.closed:
            return
        try:
            while self._left:
                written = self._in.write(self._left)
                if not written:  # None: the pipe is full
                    return
                self._left = self._left[written:]
            self._in.close()
        except BrokenPipeError:
            # A program may well end without reading its input; its exit code tells.
            self._left = memoryview(b"")
            with contextlib.suppress(OSError):
                self._in.close()

    def _read(self) -> None:
        for _ in range(_READS_A_POLL):
            data = self._out.read(_READ) if not self._out.closed else None
            if not data:  # None: nothing there yet; empty: the end
                return
            self._output += data
            del self._output[:-MOST_OUTPUT]

    def stop(self) -> None:
        """End it and its children at once."""
        if self._process.poll() is None:
            with contextlib.suppress(ProcessLookupError, PermissionError):
                os.killpg(self._process.pid, signal.SIGKILL)
            # A killed process ends at once, but for one that hangs in the kernel: that one is left to be reaped later.
            with contextlib.suppress(subprocess.TimeoutExpired):
                self._process.wait(0.5)
        self._read()
        self._close()

    def _close(self) -> None:
        for pipe in (self._in, self._out):
            with contextlib.suppress(OSError):
                pipe.close()
