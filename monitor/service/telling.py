"""Notices on their way: the outbox beside the loop, fed from commits, its outcomes committed in turn."""

from __future__ import annotations

import os
import socket
from collections.abc import Iterable
from pathlib import Path

import msgspec

from monitor.deliver.cloudevent import CloudEvent, cloud_event
from monitor.deliver.courier import Courier, Host, route_of
from monitor.deliver.outbox import Outbox
from monitor.engine.errands import overtaken
from monitor.plan import Plan
from monitor.render.times import utc_text
from monitor.service.clock import Clock
from monitor.service.log import Log
from storage.errands import ErrandStood
from storage.facts import Fact
from storage.history import Reader
from storage.store import Store


class Telling:
    """Runs the errands of a plan's receivers. Times of errands are wall clock, whatever clock events are stamped by.

    Parameters: folder, what paths in the settings start from; reader, for what waited when the daemon started.
    """

    def __init__(self, plan: Plan, store: Store, reader: Reader, folder: Path, *, clock: Clock, log: Log) -> None:
        host = Host(name=socket.gethostname() or "-", process=os.getpid(), folder=folder)
        self._outbox = Outbox(Courier({one.name: route_of(one, host) for one in plan.receivers}))
        self._store, self._clock, self._log = store, clock, log
        self._told: dict[tuple[str, str], int] = {}
        self._remembers = any(one.repeat_after is not None for one in plan.receivers)
        self.heard(reader.errands(only_waiting=not self._remembers))

    def heard(self, facts: Iterable[Fact]) -> list[Fact]:
        """Facts that were committed; returns errands that newer ones make pointless, to be committed too."""
        errands = [fact for fact in facts if isinstance(fact, ErrandStood)]
        new = [one for one in errands if one.state == "waiting" and not one.tries]
        for one in errands:
            if one.state == "delivered" and one.ended_at is not None:
                self._told[one.alarm, one.receiver] = max(one.ended_at, self._told.get((one.alarm, one.receiver), 0))
        ended: list[Fact] = list(overtaken(self._outbox.waiting, new, self._clock.now()))
        self._outbox.queue(errands)
        return ended

    def turn(self) -> list[Fact]:
        """Settle and start tries; returns the errands to be committed as they are now."""
        turned = self._outbox.turn(self._clock.now(), self._clock.monotonic(), self._event)
        for sentence in turned.tell:
            self._log.warning(sentence)
        return list(turned.changed)

    @property
    def told(self) -> dict[tuple[str, str], int]:
        """(alarm, receiver) -> when it was last delivered, without pairs that are on their way."""
        waiting = {(one.alarm, one.receiver) for one in self._outbox.waiting}
        return {pair: at for pair, at in self._told.items() if pair not in waiting}

    @property
    def left(self) -> bool:
        """Something is due or under way."""
        due = self._outbox.next_due()
        return self._outbox.busy or (due is not None and due <= self._clock.now())

    def stop(self) -> None:
        """End tries under way; their errands stay waiting in the store."""
        self._outbox.stop()

    def _event(self, notice: str) -> CloudEvent | None:
        found = self._store.notice(notice)
        if found is None:
            return None
        stream, kind, at, data = found
        source = f"/tailgauge/{self._store.identity.store_id}"
        return cloud_event(
            notice=notice, kind=kind, source=source, stream=stream, time=utc_text(at), data=msgspec.json.decode(data)
        )
