"""Readiness and watchdog messages to a service manager: the sd_notify(3) protocol, one datagram each.

The protocol is documented for any implementation: a datagram of NAME=VALUE lines to the socket that the
environment names. Without that variable nothing is sent.
"""

from __future__ import annotations

import contextlib
import os
import socket
from collections.abc import Mapping


class ServiceManager:
    """Tells the service manager how the daemon does; silent when there is none.

    Parameters: environment, where NOTIFY_SOCKET and WATCHDOG_USEC are looked for.
    """

    def __init__(self, environment: Mapping[str, str] | None = None) -> None:
        environment = os.environ if environment is None else environment
        address = environment.get("NOTIFY_SOCKET", "")
        self._address = "\0" + address[1:] if address.startswith("@") else address
        watchdog = environment.get("WATCHDOG_USEC", "")
        self.watchdog_seconds = int(watchdog) / 2e6 if watchdog.isdigit() else None
        """Real seconds between two signs of life: half of what the manager allows, as sd_notify(3) advises."""
        self._next_sign = 0.0

    def tell(self, message: str) -> None:
        """Send one message, such as 'READY=1'. A manager that does not listen is no reason to stop."""
        if not self._address:
            return
        with contextlib.suppress(OSError), socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as sender:
            sender.connect(self._address)
            sender.sendall(message.encode())

    def alive(self, real: float) -> None:
        """A sign of life, when one is due. Parameters: real, seconds of the monotonic clock."""
        if self.watchdog_seconds is not None and real >= self._next_sign:
            self._next_sign = real + self.watchdog_seconds
            self.tell("WATCHDOG=1")
