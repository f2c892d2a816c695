"""The terminal while the screen is live: keys in, changed lines out, and everything put back at the end.

Only lines that changed are written, each at its place, so that a still screen costs nothing on a slow line.
"""

from __future__ import annotations

import os
import select
import signal
import sys
import termios
import time
import tty
from collections.abc import Sequence
from types import FrameType, TracebackType
from typing import Any, NamedTuple

from rich.console import Console
from rich.text import Text

KEYS = {
    b"\x1b[A": "up", b"\x1bOA": "up", b"k": "up", b"\x1b[B": "down", b"\x1bOB": "down", b"j": "down",
    b"\x1b[C": "right", b"\x1bOC": "right", b"\x1b[D": "left", b"\x1bOD": "left", b"\x1b[5~": "page up",
    b"\x1b[6~": "page down", b"\x1b[H": "first", b"\x1b[F": "last", b"\x1b[1~": "first", b"\x1b[4~": "last",
    b"\r": "enter", b"\n": "enter", b"\x1b": "back", b"\x7f": "back", b"\x08": "back", b"b": "back", b"q": "quit",
    b"Q": "quit", b"\x04": "quit", b"h": "help", b"?": "help", b"a": "acknowledge", b"w": "side",
}  # fmt: skip
WATCHED = (signal.SIGWINCH, signal.SIGTERM, signal.SIGHUP, signal.SIGTSTP)
ESCAPE_WAIT = 0.05
"""Seconds within which the rest of a key's sequence follows its escape character."""

_NO_WRAP, _WRAP = "\x1b[?7l", "\x1b[?7h"


class Pressed(NamedTuple):
    """A key: its name, '' for one without a meaning, and what it types where text is typed ('' for nothing).

    Backspace types '\\x7f', so that it can be told from Esc, which has the same name.
    """

    name: str
    text: str = ""


class Terminal:
    """The terminal as a full screen; use it in a `with`. Leaving restores modes, cursor and what was shown."""

    def __init__(self, console: Console) -> None:
        self._console = console
        self._input = sys.stdin.fileno()
        self._painted: list[str] = []
        self._size = (0, 0)
        self._pipe = (-1, -1)
        self._old_signals: dict[int, Any] = {}
        self._old_wakeup = -1
        self._begun = b""
        self.bytes_written = 0

    def __enter__(self) -> Terminal:
        self._modes = termios.tcgetattr(self._input)
        self._pipe = os.pipe()
        for end in self._pipe:
            os.set_blocking(end, False)
        self._old_wakeup = signal.set_wakeup_fd(self._pipe[1], warn_on_full_buffer=False)
        self._old_signals = {number: signal.signal(number, _noted) for number in WATCHED}
        try:
            self._take()
        except BaseException:
            self.__exit__(None, None, None)
            raise
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        try:
            self._give_back()
        except OSError:
            pass  # The terminal is gone; there is nothing left to restore.
        finally:
            for number, handler in self._old_signals.items():
                signal.signal(number, handler)
            signal.set_wakeup_fd(self._old_wakeup)
            for end in self._pipe:
                os.close(end)

    def _take(self) -> None:
        tty.setcbreak(self._input)
        self._console.set_alt_screen(True)
        self._console.show_cursor(False)
        self._write(_NO_WRAP)
        self._painted = []

    def _give_back(self) -> None:
        try:
            self._write(f"\x1b[0m{_WRAP}")
            self._console.show_cursor(True)
            self._console.set_alt_screen(False)
        finally:
            termios.tcsetattr(self._input, termios.TCSADRAIN, self._modes)

    def _suspend(self) -> None:
        """Ctrl-Z: give the terminal back, stop, and take it again when continued."""
        self._give_back()
        signal.signal(signal.SIGTSTP, signal.SIG_DFL)
        os.kill(os.getpid(), signal.SIGTSTP)
        signal.signal(signal.SIGTSTP, _noted)
        self._take()

    def keys(self, until: float) -> list[Pressed]:
        """Keys pressed, waiting for the first until the monotonic time `until`.

        'quit' also stands for the end of input and for being told to end; a resize comes as 'resize'.
        """
        wait = max(0.0, until - time.monotonic())
        ready, _, _ = select.select([self._input, self._pipe[0]], [], [], wait)
        found = self._signals() if self._pipe[0] in ready else []
        if self._input in ready:
            data = os.read(self._input, 1024)
            if data.endswith(b"\x1b") and select.select([self._input], [], [], ESCAPE_WAIT)[0]:
                data += os.read(self._input, 1024)
            pressed, self._begun = pressed_of(self._begun + data)
            found += pressed if data else [Pressed("quit")]
        return found

    def _signals(self) -> list[Pressed]:
        numbers = os.read(self._pipe[0], 1024)
        if signal.SIGTSTP in numbers:
            self._suspend()
        ended = signal.SIGTERM in numbers or signal.SIGHUP in numbers
        return [Pressed("quit" if ended else "resize")]

    def paint(self, lines: Sequence[Text]) -> None:
        """Show the lines: write those that differ from what is shown already."""
        size = (self._console.width, self._console.height)
        out = []
        if size != self._size or not self._painted:
            out.append("\x1b[0m\x1b[2J")
            self._painted, self._size = [], size
        fresh = [self._encoded(line, size[0]) for line in lines]
        for row, text in enumerate(fresh):
            if row >= len(self._painted) or self._painted[row] != text:
                out.append(f"\x1b[{row + 1};1H{text}")
        self._painted = fresh
        self._write("".join(out))

    def _encoded(self, line: Text, width: int) -> str:
        with self._console.capture() as capture:
            self._console.print(line, end="", no_wrap=True, overflow="crop", crop=False)
        # In a full line the cursor stands on the last cell, which clearing to the end would wipe.
        return capture.get() + ("\x1b[K" if line.cell_len < width else "")

    def _write(self, text: str) -> None:
        if text:
            self.bytes_written += len(text.encode())
            self._console.file.write(text)
            self._console.file.flush()


def _noted(number: int, frame: FrameType | None) -> None:
    """The signal's number arrives through the wake-up pipe; nothing is done in the handler itself."""


def pressed_of(data: bytes) -> tuple[list[Pressed], bytes]:
    """The keys in what a terminal sent, and the bytes of a character that has not come to its end yet."""
    found: list[Pressed] = []
    while data:
        length = _sequence_length(data)
        key = data[:length]
        if length > len(data):
            return found, data
        found.append(Pressed(KEYS.get(key, ""), _typed(key)))
        data = data[length:]
    return found, b""


def keys_of(data: bytes) -> list[str]:
    """The names of the keys in what a terminal sent; keys without a meaning are left out."""
    return [key.name for key in pressed_of(data)[0] if key.name]


def _typed(key: bytes) -> str:
    if key in (b"\x7f", b"\x08"):
        return "\x7f"
    text = key.decode("utf-8", "ignore")
    return text if text.isprintable() and not key.startswith(b"\x1b") else ""


def _sequence_length(data: bytes) -> int:
    """Bytes of the first key: an escape sequence or a character of UTF-8 as a whole, so that no part is a key."""
    if 0xC2 <= data[0] <= 0xF4:
        length = 2 if data[0] < 0xE0 else 3 if data[0] < 0xF0 else 4
        return length if all(0x80 <= byte < 0xC0 for byte in data[1:length]) else 1
    if data[:2] == b"\x1bO":
        return min(3, len(data))
    if data[:2] != b"\x1b[":
        return 1
    for at in range(2, len(data)):
        if 0x40 <= data[at] <= 0x7E:  # the final byte of a control sequence, ECMA-48 section 5.4
            return at + 1
    return len(data)
