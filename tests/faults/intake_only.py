"""The daemon's loop without its worker, as a process that faults are injected into.

    python -m tests.faults.intake_only FOLDER follow|finish BLOCK COMMIT_EVENTS [apart]

`apart` is the negative control: positions and panes go into two transactions, as they must not.
"""

from __future__ import annotations

import os
import signal
import sys
import time
from collections.abc import Sequence
from pathlib import Path

from monitor.cli.output import load_plan
from monitor.engine.stimuli import Outcome
from monitor.service import loop as loops
from monitor.service.clock import SystemClock
from monitor.service.log import Log
from monitor.service.run import _open_feeds, _remember
from storage.facts import ChainState, Fact, PanePart
from storage.store import Store, open_store


class NoWorker:
    """A worker that is never free: what is sealed stays queued. Never ready: loading compiled parsers takes time,
    and faults are to strike while lines are read."""

    ready = False
    busy = True

    def poll(self) -> Outcome | None:
        return None


class Apart(Store):
    """The fault that the design rules out: positions first, then what was learnt up to them; killed between the two."""

    commits = 0

    def commit(self, facts: Sequence[Fact]) -> None:
        super().commit([fact for fact in facts if isinstance(fact, ChainState)])
        Apart.commits += any(isinstance(fact, PanePart) for fact in facts)
        if Apart.commits == 3:
            os.kill(os.getpid(), signal.SIGKILL)
        super().commit([fact for fact in facts if not isinstance(fact, ChainState)])


def main(arguments: list[str]) -> None:
    folder, mode, block, commit_events, *apart = arguments
    loops.BLOCK, loops.COMMIT_EVENTS = int(block), int(commit_events)
    loops.FIRST_RETRY = 0.05
    base, clock = Path(folder), SystemClock()
    log = Log(clock)
    plan = load_plan(base / "t.toml")
    store = open_store(base / plan.store, store_id="test", now=clock.now(), distinct=plan.distinct)
    store.db.execute("pragma synchronous = full")
    if apart:
        store.__class__ = Apart
    state = _remember(plan, store, clock, log)
    feeds = _open_feeds(plan, base, state, clock)
    loop = loops.Loop(state, store, feeds, NoWorker(), clock=clock, log=log)  # type: ignore[arg-type]
    if mode == "finish":
        loop.read_to_end()
        while not loop.commit():
            time.sleep(0.05)
        store.close()
        return
    while True:
        if not loop.turn():
            time.sleep(0.002)


if __name__ == "__main__":
    main(sys.argv[1:])
