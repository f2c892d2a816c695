"""Acknowledging from the live screen: a note is typed at the bottom, the daemon is asked aside, its answer is shown."""

from __future__ import annotations

import getpass
import time
from pathlib import Path
from threading import Thread
from types import TracebackType

import msgspec

from monitor.alarms.alarm import Alarm
from monitor.alarms.states import ACKNOWLEDGED
from monitor.cli.output import open_place, plan_of
from monitor.cli.terminal import Pressed
from monitor.cli.watching import StoreWatch
from monitor.engine.alarming import Act
from monitor.errors import MonitorError
from monitor.render.attention import to_acknowledge
from monitor.render.frame import Asked
from monitor.render.safe import plain
from monitor.render.seen import StreamSeen
from monitor.service.acting import PATIENCE, Answer, carry_out
from monitor.service.clock import Clock
from storage.errors import StoreError

ANSWER_SECONDS = 15.0
"""How long an answer stays on the screen, unless a key is pressed before."""
LONGEST_NOTE = 400


class Typing(msgspec.Struct, frozen=True):
    """A note being typed for an alarm."""

    alarm: Alarm
    text: str = ""


def typed(typing: Typing, key: Pressed) -> Typing:
    """The note after a key."""
    if key.text == "\x7f":
        return Typing(typing.alarm, typing.text[:-1])
    return Typing(typing.alarm, (typing.text + key.text)[:LONGEST_NOTE])


class Acting:
    """The one act in hand. The request runs in a thread of its own, so that painting never waits for it."""

    def __init__(self, watch: StoreWatch, clock: Clock) -> None:
        self._watch = watch
        self._clock = clock
        self._typing: Typing | None = None
        self._thread: Thread | None = None
        self._answer = ""
        self._answered = 0.0
        self._failure: Exception | None = None

    def __enter__(self) -> Acting:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        # The request is in the store by then; without a daemon it is being carried out, and is let come to its end.
        if self._thread is not None:
            self._thread.join(PATIENCE + 1.0)

    @property
    def waiting(self) -> bool:
        """Whether an answer is waited for."""
        return self._thread is not None and self._thread.is_alive()

    def begin(self, stream: StreamSeen | None) -> None:
        """Start typing the note for the stream's most pressing alarm, or say that there is none."""
        if stream is None or self.waiting:
            return
        alarm = to_acknowledge(stream)
        if alarm is None:
            self._say(f"{plain(stream.name)} has no alarm to acknowledge.")
        else:
            self._typing = Typing(alarm)

    def takes(self, key: Pressed) -> bool:
        """Whether the key belongs to the note: all do while one is typed, but for the end and a resize."""
        typing = self._typing
        if typing is None:
            if not self.waiting and key.name != "resize":
                self._answer = ""
            return False
        if key.name == "resize" or (key.name == "quit" and not key.text):
            return False
        if key.name == "enter":
            self._typing = None
            self._send(typing)
        elif key.name == "back" and not key.text:
            self._typing = None
            self._say("Not sent.")
        else:
            self._typing = typed(typing, key)
        return True

    def asked(self) -> Asked | None:
        """What stands above the keys: the note being typed, that an answer is waited for, or the answer.

        Raises what went wrong in the thread, if that was no refusal.
        """
        if self._failure is not None:
            raise self._failure
        if self._typing is not None:
            alarm = self._typing.alarm
            name = f"{alarm.rule} of {plain(alarm.stream)}"
            return Asked(f"Acknowledge {name}, with a note or none (Enter: send, Esc: do not):", self._typing.text)
        if self.waiting:
            return Asked("Asking ...")
        if self._answer and time.monotonic() - self._answered < ANSWER_SECONDS:
            return Asked(self._answer)
        return None

    def _say(self, text: str) -> None:
        self._answer, self._answered = text, time.monotonic()

    def _send(self, typing: Typing) -> None:
        try:
            path, by = self._watch.path, getpass.getuser()
        except (KeyError, OSError):
            self._say("Not sent: your login has no name here. Use `tailgauge acknowledge --by NAME`.")
        except (MonitorError, StoreError) as error:
            self._say(f"Not sent. {error}")
        else:
            act = Act(act="acknowledge", by=by, alarm=typing.alarm.id, note=typing.text.strip())
            self._thread = Thread(target=self._ask, args=(path, act, typing.alarm), daemon=True)
            self._thread.start()

    def _ask(self, path: Path, act: Act, alarm: Alarm) -> None:
        """In the thread: what it opens is its own, and all it leaves is a sentence."""
        name = f"{plain(alarm.stream)}, {alarm.rule}"
        try:
            with open_place(path) as reader:
                plan = plan_of(reader)
            self._say(f"{name}: {answer_words(carry_out(path, plan, act, self._clock))}.")
        except (MonitorError, StoreError) as error:
            self._say(f"{name}: not acknowledged. {error}")
        except Exception as error:  # noqa: BLE001 - raised again by the main thread, once the terminal is given back
            self._failure = error


def answer_words(answer: Answer) -> str:
    """What became of an acknowledgement, after the alarm's name."""
    match answer.outcome:
        case "done":
            return "acknowledged" if answer.words == ACKNOWLEDGED else f"acknowledged, now {answer.words}"
        case "refused":
            return f"refused, {answer.words}"
        case "queued":
            return f"queued, {answer.words}"
