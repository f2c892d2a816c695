"""What a person asks for, carried out: by the daemon when one runs, else by the same engine on the spot."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Literal

import msgspec

from monitor.engine.alarming import Act
from monitor.engine.restore import restore
from monitor.engine.step import step
from monitor.engine.stimuli import Asked
from monitor.plan import Plan
from monitor.service.clock import Clock
from monitor.service.run import remembered
from storage.errors import StoreBusy
from storage.history import open_reader
from storage.requests import ask
from storage.store import open_store

PATIENCE = 2.0
"""Real seconds that the daemon gets to answer before the request counts as queued."""


class Answer(msgspec.Struct, frozen=True, kw_only=True):
    """What became of a request, and in which words."""

    outcome: Literal["done", "refused", "queued"]
    words: str


def carry_out(path: Path, plan: Plan, act: Act, clock: Clock) -> Answer:
    """Let the engine decide on an act, whichever process holds the store.

    Parameters: path, the store; plan, in force there. Raises StoreError.
    """
    request = os.urandom(8).hex()
    text = msgspec.json.encode(act).decode()
    ask(path, request, text, clock.now())
    try:
        store = open_store(path, store_id="", now=clock.now(), distinct=plan.distinct)
    except StoreBusy:
        return _awaited(path, request, clock)
    with store:
        with open_reader(path) as reader:
            state = restore(plan, store.identity.distinct, remembered(reader), clock.now())
        for waiting, wanted, alarm in store.open_requests():
            store.commit(step(state, Asked(request=waiting, act=wanted, alarm=alarm, now=clock.now())))
    return _answer(path, request) or Answer(
        outcome="queued", words="it is in the store, and will be decided when a daemon runs"
    )


def _awaited(path: Path, request: str, clock: Clock) -> Answer:
    until = clock.monotonic() + PATIENCE
    while clock.monotonic() < until:
        found = _answer(path, request)
        if found is not None:
            return found
        clock.sleep(0.05)
    return Answer(outcome="queued", words="the daemon has not answered yet, it will")


def _answer(path: Path, request: str) -> Answer | None:
    with open_reader(path) as reader:
        found = next((one for one in reader.requests() if one.id == request), None)
    if found is None or found.done is None:
        return None
    return Answer(outcome="done" if found.done else "refused", words=found.answer or "")
