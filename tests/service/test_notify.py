"""sd_notify(3): datagrams to the socket that the environment names; nothing without it."""

from __future__ import annotations

import socket
from pathlib import Path

from monitor.service.notify import ServiceManager


def test_messages_reach_the_socket_and_signs_of_life_keep_their_pace(tmp_path: Path) -> None:
    address = str(tmp_path / "notify")
    with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as receiver:
        receiver.bind(address)
        receiver.settimeout(5)
        manager = ServiceManager({"NOTIFY_SOCKET": address, "WATCHDOG_USEC": "10000000"})
        manager.tell("READY=1")
        assert receiver.recv(100) == b"READY=1"
        for real in (0.0, 1.0, 4.9, 5.0, 9.9, 10.0):
            manager.alive(real)
        receiver.settimeout(0.2)
        signs = 0
        try:
            while receiver.recv(100) == b"WATCHDOG=1":
                signs += 1
        except TimeoutError:
            pass
        assert signs == 3  # at 0, 5 and 10 seconds


def test_nothing_is_sent_without_a_manager_and_a_dead_one_is_no_trouble(tmp_path: Path) -> None:
    ServiceManager({}).tell("READY=1")
    ServiceManager({}).alive(0.0)
    ServiceManager({"NOTIFY_SOCKET": str(tmp_path / "nobody")}).tell("READY=1")
