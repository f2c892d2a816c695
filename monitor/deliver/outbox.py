"""The errands that wait, and the courier that runs them: what the daemon turns beside its feeds. Never waits.

The caller commits every errand that comes back changed. A crash between a delivery and its commit sends the notice
again, with the same id: at least once, and a receiver that remembers ids sees it once.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable

import msgspec

from monitor.deliver.cloudevent import CloudEvent
from monitor.deliver.courier import Courier, Delivery
from monitor.deliver.route import Backoff, next_try
from storage.errands import ErrandStood

SECOND = 1_000_000_000

EventOf = Callable[[str], CloudEvent | None]
"""The event of a notice by its id; None when the store no longer holds it."""


class Turned(msgspec.Struct, frozen=True, kw_only=True):
    """What a turn did: errands to commit as they are now, and sentences for the log."""

    changed: tuple[ErrandStood, ...]
    tell: tuple[str, ...]


class Outbox:
    """Holds the waiting errands of the receivers that the settings name.

    Errands of other receivers are ended as given up: nobody is left to take them.
    """

    def __init__(self, courier: Courier, backoff: Backoff | None = None) -> None:
        self._courier = courier
        self._backoff = backoff if backoff is not None else Backoff()
        self._waiting: dict[tuple[str, str], ErrandStood] = {}

    def queue(self, errands: Iterable[ErrandStood]) -> None:
        """Take errands in, once they are committed; one that is no longer waiting takes its place away."""
        for one in errands:
            if one.state == "waiting":
                self._waiting[one.notice, one.receiver] = one
            else:
                self._waiting.pop((one.notice, one.receiver), None)

    @property
    def waiting(self) -> tuple[ErrandStood, ...]:
        """Everything that is not ended, in the order in which it is tried."""
        return tuple(sorted(self._waiting.values(), key=_order))

    @property
    def busy(self) -> bool:
        """A try is under way: poll again soon."""
        return self._courier.busy

    def turn(self, now: int, real: float, event_of: EventOf) -> Turned:
        """Settle the tries that ended and start those that are due.

        Parameters: now, wall clock (ns); real, monotonic clock (s).
        """
        changed: list[ErrandStood] = []
        tell: list[str] = []
        for delivery in self._courier.poll(real):
            if delivery.tell is not None:
                tell.append(delivery.tell)
            settled = self._settled(delivery, now)
            if settled is not None:
                changed.append(settled)
                if settled.state == "given up":
                    tell.append(f"notify.{settled.receiver}: a notice is given up after {settled.tries} tries")
        self.queue(changed)
        for one in self.waiting:
            if one.due <= now:
                dropped = self._start(one, now, real, event_of)
                if dropped is not None:
                    changed.append(dropped)
        self.queue(changed)
        return Turned(changed=tuple(changed), tell=tuple(tell))

    def _settled(self, delivery: Delivery, now: int) -> ErrandStood | None:
        one = self._waiting.get((delivery.notice, delivery.receiver))
        if one is None:  # overtaken while it was under way
            return None
        tries, first = one.tries + 1, one.first_try if one.first_try is not None else now
        tried = msgspec.structs.replace(one, tries=tries, first_try=first, detail=delivery.receipt.detail, known_at=now)
        if delivery.receipt.delivered:
            return msgspec.structs.replace(tried, state="delivered", ended_at=now)
        wait = next_try(one.notice, tries, (now - first) / SECOND, self._backoff)
        if wait is None:
            return msgspec.structs.replace(tried, state="given up", ended_at=now)
        return msgspec.structs.replace(tried, due=now + round(wait * SECOND))

    def _start(self, one: ErrandStood, now: int, real: float, event_of: EventOf) -> ErrandStood | None:
        """Start a try if its receiver is free; returns the errand when it can never be tried."""
        if not self._courier.knows(one.receiver):
            detail = "the settings no longer name this receiver"
            return msgspec.structs.replace(one, state="given up", ended_at=now, detail=detail, known_at=now)
        if not self._courier.free(one.receiver):
            return None
        event = event_of(one.notice)
        if event is None:
            detail = "the notice is no longer in the store"
            return msgspec.structs.replace(one, state="given up", ended_at=now, detail=detail, known_at=now)
        self._courier.send(one.notice, one.receiver, event, real)
        return None

    def next_due(self) -> int | None:
        """When the next waiting errand is due (ns), or None."""
        return min((one.due for one in self._waiting.values()), default=None)

    def stop(self) -> None:
        """End the tries under way; their errands stay waiting in the store."""
        self._courier.stop()


def _order(one: ErrandStood) -> tuple[int, str, str]:
    return (one.at, one.notice, one.receiver)
