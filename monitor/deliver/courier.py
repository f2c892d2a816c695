"""Sends under way: at most so many at once, one a receiver, each polled; a receiver's failure is told once.

One at a time for each receiver keeps its notices in order, and keeps a receiver that hangs from taking every place.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path

import msgspec

from monitor.deliver.cloudevent import CloudEvent
from monitor.deliver.command import CommandRoute
from monitor.deliver.post import PostRoute
from monitor.deliver.route import Receipt, Route, Sending
from monitor.deliver.syslog import SyslogRoute
from monitor.plan.receivers import CommandWay, PostWay, Receiver
from monitor.plan.spans import SECOND

AT_ONCE = 4


class Delivery(msgspec.Struct, frozen=True, kw_only=True):
    """A try that ended.

    tell  a sentence for the log: when a receiver begins to fail, and when it is reached again; else None
    """

    notice: str
    receiver: str
    receipt: Receipt
    tell: str | None


@dataclass(frozen=True, slots=True)
class Host:
    """What routes must know of the machine, which they do not look up themselves."""

    name: str
    process: int
    folder: Path


def route_of(receiver: Receiver, host: Host) -> Route:
    """The way to a receiver of the plan."""
    timeout = receiver.timeout / SECOND
    way = receiver.way
    if isinstance(way, CommandWay):
        return CommandRoute(way.arguments, folder=host.folder, timeout=timeout)
    if isinstance(way, PostWay):
        return PostRoute(way, folder=host.folder, timeout=timeout)
    return SyslogRoute(way, host=host.name, process=host.process, timeout=timeout)


class Courier:
    """Give it notices while `free`, poll it in each turn, stop it at the end: what was under way stays queued."""

    def __init__(self, routes: Mapping[str, Route], at_once: int = AT_ONCE) -> None:
        self._routes = dict(routes)
        self._at_once = at_once
        self._under_way: dict[str, tuple[str, Sending]] = {}
        self._failing: set[str] = set()

    def knows(self, receiver: str) -> bool:
        """There is a way to this receiver."""
        return receiver in self._routes

    def free(self, receiver: str) -> bool:
        """A notice for this receiver could be sent now."""
        return self.knows(receiver) and receiver not in self._under_way and len(self._under_way) < self._at_once

    @property
    def busy(self) -> bool:
        """Something is under way."""
        return bool(self._under_way)

    def send(self, notice: str, receiver: str, event: CloudEvent, real: float) -> None:
        """Start sending a notice to a receiver that is free."""
        assert self.free(receiver), receiver
        self._under_way[receiver] = (notice, self._routes[receiver].send(event, real))

    def poll(self, real: float) -> list[Delivery]:
        """The tries that ended since; never waits. `real` is the monotonic clock in seconds."""
        ended = []
        for receiver, (notice, sending) in list(self._under_way.items()):
            receipt = sending.poll(real)
            if receipt is not None:
                del self._under_way[receiver]
                told = self._news(receiver, receipt)
                ended.append(Delivery(notice=notice, receiver=receiver, receipt=receipt, tell=told))
        return ended

    def _news(self, receiver: str, receipt: Receipt) -> str | None:
        if receipt.delivered:
            if receiver not in self._failing:
                return None
            self._failing.discard(receiver)
            return f"notify.{receiver}: reached again"
        if receiver in self._failing:
            return None
        self._failing.add(receiver)
        return f"notify.{receiver}: could not deliver: {receipt.detail}. It is tried again, more and more rarely."

    def stop(self) -> None:
        """End what is under way."""
        for _, sending in self._under_way.values():
            sending.stop()
        self._under_way.clear()
