"""Sends over the network, each in a child process of its own: a name that cannot be looked up blocks nobody."""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Any

import msgspec

from monitor.deliver.child import Child
from monitor.deliver.route import Ended, Receipt, Sending, delivered, failed

OUTGOING = Path(__file__).with_name("outgoing.py")


class _Answer(msgspec.Struct, frozen=True):
    delivered: bool
    detail: str


def start(task: dict[str, Any], place: str, timeout: float, real: float) -> Sending:
    """Begin a task of monitor.deliver.outgoing. `place` is what messages call the receiver; timeout in seconds."""
    # -I and -S: neither the user's packages nor the environment take part, and the start takes a few hundredths.
    arguments = [sys.executable, "-I", "-S", str(OUTGOING)]
    try:
        child = Child(arguments, msgspec.json.encode({**task, "timeout": timeout}), deadline=real + timeout + 2.0)
    except OSError as error:
        return Ended(f"{place}: no process could be started for it ({error.strerror})")
    return _Task(child, place, timeout)


class _Task:
    def __init__(self, child: Child, place: str, timeout: float) -> None:
        self._child = child
        self._place = place
        self._timeout = timeout

    def poll(self, real: float) -> Receipt | None:
        end = self._child.poll(real)
        if end is None:
            return None
        if end.code is None:
            return failed(f"{self._place}: not done within {self._timeout:g} s")
        try:
            answer = msgspec.json.decode(end.output, type=_Answer)
        except msgspec.DecodeError:
            said = end.output.decode("utf-8", "replace")
            return failed(f"{self._place}: the sending process ended with code {end.code}: {said}")
        return delivered(answer.detail) if answer.delivered else failed(f"{self._place}: {answer.detail}")

    def stop(self) -> None:
        self._child.stop()
