"""The live screen on a pseudo-terminal: keys, resize, new facts, and a terminal left as it was found."""

from __future__ import annotations

import fcntl
import os
import pty
import re
import select
import signal
import struct
import subprocess
import sys
import termios
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from monitor.cli.live import Page, turned
from monitor.cli.terminal import Pressed, keys_of, pressed_of
from storage.history import open_reader
from tests.stores import chain, make, settings_fact, stream, warehouse

PATIENCE = 20.0


def test_keys_of_what_a_terminal_sends() -> None:
    assert keys_of(b"jk\r") == ["down", "up", "enter"]
    assert keys_of(b"\x1b[A\x1bOB\x1b[5~q") == ["up", "down", "page up", "quit"]
    assert keys_of(b"\x1b") == ["back"]
    assert keys_of(b"\x1b[1;5Az\xff") == []  # a key without a meaning is not taken apart into letters
    assert keys_of(b"\x1b[") == []
    assert keys_of(b"aw") == ["acknowledge", "side"]


def test_what_is_typed_and_what_comes_in_parts() -> None:
    pressed, rest = pressed_of("bö\x7f\r\x1b[A".encode() + b"\xc3")
    assert [key.text for key in pressed] == ["b", "ö", "\x7f", "", ""]
    assert [key.name for key in pressed] == ["back", "", "back", "enter", "up"]
    assert rest == b"\xc3"
    assert pressed_of(rest + b"\xbc") == ([Pressed("", "ü")], b"")
    # Bytes that are no text, and keys without a meaning, type nothing and are not taken apart.
    assert pressed_of(b"\xff\xc3\x1b[1;5A\x07") == ([Pressed("")] * 4, b"")


def test_pages_turn_with_the_keys() -> None:
    names = ["a", "b", "c"]
    page = turned(Page(selected="a"), "down", names, 2)
    assert (page.selected, page.chosen) == ("b", True)
    assert not turned(Page(selected="a"), "help", names, 2).chosen
    assert turned(page, "page down", names, 2).selected == "c"
    close = turned(page, "enter", names, 2)
    assert (close.selected, close.close) == ("b", True)
    assert turned(close, "right", names, 2) == Page(selected="c", chosen=True, close=True)
    assert turned(page, "right", names, 2) == page
    assert turned(page, "side", names, 2) == page
    assert turned(close, "side", names, 2) == Page(selected="b", chosen=True, close=True, side="watch")
    assert turned(turned(close, "side", names, 2), "side", names, 2) == close
    helped = turned(close, "help", names, 2)
    assert turned(helped, "down", names, 2) == helped
    assert turned(helped, "back", names, 2) == close
    assert turned(close, "back", names, 2) == page
    assert turned(Page(), "enter", [], 2) == Page()


class Played:
    """A program on a pseudo-terminal, and what it has shown since it was last asked."""

    def __init__(self, arguments: list[str], columns: int = 80, rows: int = 24, **environment: str) -> None:
        self.master, slave = pty.openpty()
        self.resize(columns, rows)
        self.modes = termios.tcgetattr(slave)
        self.slave = slave
        self.process = subprocess.Popen(
            [sys.executable, "-m", "monitor", *arguments], stdin=slave, stdout=slave, stderr=slave,
            env={**os.environ, "TERM": "xterm", "PYTHONIOENCODING": "utf-8", **environment}, process_group=0,
        )  # fmt: skip
        self.shown = ""

    def resize(self, columns: int, rows: int) -> None:
        fcntl.ioctl(self.master, termios.TIOCSWINSZ, struct.pack("HHHH", rows, columns, 0, 0))

    def send(self, keys: str) -> None:
        self.shown = ""
        os.write(self.master, keys.encode())

    def wait_for(self, text: str) -> str:
        """Everything shown up to the first appearance of `text`; fails when it does not come."""
        end = time.monotonic() + PATIENCE
        while text not in self.shown:
            left = end - time.monotonic()
            assert left > 0, f"{text!r} did not come; shown: {self.shown[-2000:]!r}"
            if select.select([self.master], [], [], min(left, 0.2))[0]:
                self.shown += os.read(self.master, 65536).decode("utf-8", "replace")
        return self.shown

    def stopped(self) -> int:
        """The status with which the program stopped; fails when it does not."""
        end = time.monotonic() + PATIENCE
        while time.monotonic() < end:
            found, status = os.waitpid(self.process.pid, os.WUNTRACED | os.WNOHANG)
            if found:
                return status
            time.sleep(0.02)
        raise AssertionError("the program did not stop")

    def end(self) -> int:
        """Exit code, having checked that the terminal is as it was found."""
        self.wait_for("\x1b[?1049l")
        code = self.process.wait(PATIENCE)
        assert "\x1b[?25h" in self.shown  # the cursor is back
        assert "\x1b[?7h" in self.shown  # and so is wrapping at the edge
        assert termios.tcgetattr(self.slave) == self.modes
        return code

    def close(self) -> None:
        if self.process.poll() is None:
            self.process.kill()
            self.process.wait()
        os.close(self.master)
        os.close(self.slave)


@pytest.fixture
def place(tmp_path: Path) -> Path:
    return warehouse(tmp_path / "orders.db")


@pytest.fixture
def played(place: Path) -> Iterator[Played]:
    program = Played(["screen", "--in", str(place)])
    yield program
    program.close()


def test_keys_move_look_closer_help_and_quit(played: Played) -> None:
    first = played.wait_for("q: quit")
    assert first.startswith("\x1b[?1049h")
    assert "> \\x1b[2J[red]" in first  # the dock that has fallen silent comes first
    played.send("\x1b[B")
    played.wait_for("> north-dock")
    played.send("j\r")
    played.wait_for("Share of events at or above a size")
    played.send("w")
    played.wait_for("How far each rule is on its way to an alarm")
    played.send("w")
    played.wait_for("Share of events at or above a size")
    played.send("h")
    played.wait_for("keys and figures")
    played.send("\x1b")
    played.wait_for("Share of events at or above a size")
    played.send("b")
    played.wait_for("2 of 6 streams need a look: ")
    played.send("q")
    assert played.end() == 0


def test_an_alarm_is_acknowledged_with_a_note_and_the_answer_is_shown(played: Played, place: Path) -> None:
    played.wait_for("q: quit")
    played.send("\x1b[B")
    played.wait_for("> north-dock")
    played.send("a")
    played.wait_for("Acknowledge exponent of north-dock, with a note")
    played.send("quit")  # letters are text now, not keys
    played.wait_for("> quit_")
    played.send("\x1b")
    played.wait_for("Not sent.")
    played.send("a")
    played.wait_for("Acknowledge exponent of north-dock")
    played.send("größer\x7f\x7f Küche\x1b[A\r")
    played.wait_for("north-dock, exponent: acknowledged.")
    played.wait_for("3 alarms, 2 acknowledged, 1 shelved")
    with open_reader(place) as reader:
        stood = next(one for one in reader.alarms() if (one.stream, one.rule) == ("north-dock", "exponent"))
        last = reader.alarm_moves(stood.id)[-1]
    assert (stood.state, last.to_state, last.note) == ("acknowledged", "acknowledged", "größ Küche")
    played.send("a")
    played.wait_for("north-dock has no alarm to acknowledge.")
    played.send("q")
    assert played.end() == 0


def test_the_screen_goes_on_while_a_silent_daemon_is_asked(played: Played, place: Path) -> None:
    """Another process holds the store and answers nothing: the clock ticks on, and the request counts as queued."""
    played.wait_for("q: quit")
    with make(place):
        played.send("j")
        played.wait_for("> north-dock")
        played.send("a")
        played.wait_for("with a note")
        played.send("\r")
        played.wait_for("Asking ...")
        played.shown = ""
        asked = time.monotonic()
        played.wait_for("queued, the daemon has not")
        assert time.monotonic() - asked < PATIENCE / 2
        assert len(re.findall(r"\x1b\[1;1H", played.shown)) >= 1  # the clock's line was painted meanwhile
        with open_reader(place) as reader:
            assert len(reader.requests(only_open=True)) == 1
    played.send("q")
    assert played.end() == 0


def test_a_resize_is_followed_at_once(played: Played) -> None:
    assert "decide whether the plan still holds" not in played.wait_for("q: quit")
    played.shown = ""
    played.resize(150, 40)
    os.kill(played.process.pid, signal.SIGWINCH)
    assert "\x1b[2J" in played.wait_for("\x1b[40;1H")
    assert "decide whether the plan still holds" in played.shown
    played.send("q")
    assert played.end() == 0


@pytest.mark.parametrize(("number", "code"), [(signal.SIGTERM, 0), (signal.SIGHUP, 0), (signal.SIGINT, 130)])
def test_the_terminal_is_restored_however_the_screen_ends(played: Played, number: signal.Signals, code: int) -> None:
    played.wait_for("q: quit")
    os.kill(played.process.pid, number)
    assert played.end() == code


def test_stopped_and_continued_it_gives_the_terminal_back_and_takes_it_again(played: Played) -> None:
    played.wait_for("q: quit")
    played.shown = ""
    os.kill(played.process.pid, signal.SIGTSTP)
    played.wait_for("\x1b[?1049l")
    assert os.WIFSTOPPED(played.stopped())
    played.shown = ""
    os.kill(played.process.pid, signal.SIGCONT)
    played.wait_for("\x1b[?1049h")
    played.wait_for("q: quit")
    played.send("q")
    assert played.end() == 0


def test_what_a_daemon_commits_is_seen_and_a_daemon_that_ends_is_survived(tmp_path: Path) -> None:
    path = tmp_path / "live.db"
    store = make(path)
    store.commit([settings_fact(), chain()])
    program = Played(["screen", "--in", str(path)])
    try:
        program.wait_for("No stream yet")
        store.commit([stream("pier", events=4_321)])
        program.wait_for("4 321 events so far")
        store.close()
        with make(path) as again:
            again.commit([stream("pier", events=5_432)])
            program.wait_for("5 432")
        program.send("q")
        assert program.end() == 0
    finally:
        program.close()


def test_only_changed_lines_are_written_again(played: Played) -> None:
    played.wait_for("q: quit")
    time.sleep(0.3)
    played.shown = ""
    time.sleep(2.2)
    played.wait_for("\x1b[1;1H")
    rows = re.findall(r"\x1b\[(\d+);1H", played.shown)
    # The clock's line each second; a line with an age only when that age shows another number.
    assert len(rows) < 3 * 8
    assert "\x1b[2J" not in played.shown
    played.send("q")
    assert played.end() == 0


def test_without_colour_no_colour_is_sent(place: Path) -> None:
    program = Played(["screen", "--in", str(place)], NO_COLOR="1")
    try:
        shown = program.wait_for("q: quit")
        assert not re.search(r"\x1b\[[0-9;]*(3[0-9]|9[0-7])m", shown)
        assert "tail heavier since about" in shown
        program.send("q")
        assert program.end() == 0
    finally:
        program.close()


def test_a_terminal_that_cannot_be_painted_over_gets_one_frame_of_plain_text(place: Path) -> None:
    program = Played(["screen", "--in", str(place)], TERM="dumb")
    try:
        shown = program.wait_for("rejected")
        assert program.process.wait(PATIENCE) == 0
        assert "\x1b" not in shown
    finally:
        program.close()
