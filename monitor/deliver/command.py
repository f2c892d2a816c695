"""A notice given to a program of the user's: an argument list, never a shell; the CloudEvent on its standard input.

Exit code 0 means delivered. Whatever the program prints is kept, bounded, as the detail of the receipt.
"""

from __future__ import annotations

import signal
from collections.abc import Sequence
from pathlib import Path

from monitor.deliver.child import Child, ChildEnd
from monitor.deliver.cloudevent import CloudEvent, structured
from monitor.deliver.route import Ended, Receipt, Sending, delivered, failed


class CommandRoute:
    """Runs a program for each notice.

    Parameters: folder, where it runs and what relative paths mean: the folder of the settings file; timeout, seconds.
    """

    def __init__(self, arguments: Sequence[str], *, folder: Path, timeout: float) -> None:
        self._arguments = list(arguments)
        self._folder = folder
        self._timeout = timeout

    def send(self, event: CloudEvent, real: float) -> Sending:
        """Start the program."""
        program = self._arguments[0]
        if "/" in program:
            program = str((self._folder / program).resolve())
        arguments = [program, *self._arguments[1:]]
        try:
            child = Child(arguments, structured(event), deadline=real + self._timeout, folder=self._folder)
        except OSError as error:
            return Ended(f"{program}: cannot be run ({error.strerror})")
        return _Running(child, program, self._timeout)


class _Running:
    def __init__(self, child: Child, program: str, timeout: float) -> None:
        self._child = child
        self._program = program
        self._timeout = timeout

    def poll(self, real: float) -> Receipt | None:
        end = self._child.poll(real)
        if end is None:
            return None
        said = end.output.decode("utf-8", "replace").strip()
        if end.code == 0:
            return delivered(f"exit code 0{': ' if said else ''}{said}")
        return failed(f"{self._program}: {_ending(end, self._timeout)}{': ' if said else ''}{said}")

    def stop(self) -> None:
        self._child.stop()


def _ending(end: ChildEnd, timeout: float) -> str:
    if end.code is None:
        return f"took longer than {timeout:g} s and was ended"
    if end.code < 0:
        try:
            return f"was ended by {signal.Signals(-end.code).name}"
        except ValueError:
            return f"was ended by signal {-end.code}"
    return f"exit code {end.code}"
