"""Start and end of the daemon: lock, store, feeds, worker, signals."""

from __future__ import annotations

import os
import signal
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from types import FrameType

from monitor.engine.restore import Remembered, restore
from monitor.engine.state import State
from monitor.errors import SettingsError
from monitor.plan import Plan, read_plan
from monitor.plan.spans import span_text
from monitor.service.clock import Clock
from monitor.service.feeds import OpenFeed, must_exist
from monitor.service.log import Log
from monitor.service.loop import Loop
from monitor.service.worker import Worker
from storage.errors import StoreFull
from storage.facts import SettingsTaken
from storage.history import Reader, open_reader
from storage.store import Store, open_store

IDLE_SLEEP = 0.1


class Stop:
    """Set by SIGTERM or SIGINT; asked between two turns."""

    def __init__(self) -> None:
        self.wanted = False

    def __call__(self, _signal: int, _frame: FrameType | None) -> None:
        self.wanted = True


@contextmanager
def stop_on_signals() -> Iterator[Stop]:
    """SIGTERM and SIGINT ask the loop to end instead of ending the process."""
    stop = Stop()
    before = {number: signal.signal(number, stop) for number in (signal.SIGTERM, signal.SIGINT)}
    try:
        yield stop
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


def run_daemon(
    plan: Plan,
    base: Path,
    *,
    finish: bool,
    clock: Clock,
    log: Log,
    on_progress: Callable[[int], None] | None = None,
) -> None:
    """Follow the plan's feeds until a signal, or with `finish` read what is there, seal, judge and stop.

    Parameters: base, the folder that relative paths start from; on_progress, told the refits left (finish only).
    Raises StoreError, SourceError or SettingsError; on a clean end everything read is committed.
    """
    path = base / plan.store
    store = open_store(path, store_id=os.urandom(8).hex(), now=clock.now(), distinct=plan.distinct)
    with store, stop_on_signals() as stop:
        state = _remember(plan, store, path, clock, log)
        feeds = _open_feeds(plan, base, state, clock)
        worker = Worker(path)
        loop = Loop(state, store, feeds, worker, clock=clock, log=log)
        log.info(f"watching {', '.join(feed.name for feed in plan.feeds)} into {path}")
        try:
            if finish:
                must_exist(feeds)
                _finish(loop, stop, on_progress)
            else:
                _follow(loop, stop)
        finally:
            worker.stop()
            for feed in feeds:
                feed.close()
        if loop.failing:
            raise StoreFull(f"{path}: the last commit failed. What was read since the one before will be read again.")
        log.info("stopped; everything read is committed")


def _open_feeds(plan: Plan, base: Path, state: State, clock: Clock) -> list[OpenFeed]:
    bookmarks: dict[str, dict[str, str]] = {}
    for (feed, chain), known in state.chains.items():
        bookmarks.setdefault(feed, {})[chain] = known.bookmark
    return [OpenFeed(feed, base, bookmarks.get(feed.name, {}), clock) for feed in plan.feeds]


def _follow(loop: Loop, stop: Stop) -> None:
    while not stop.wanted:
        if not loop.turn() and not stop.wanted:
            loop.clock.sleep(IDLE_SLEEP)
    loop.commit()


def _finish(loop: Loop, stop: Stop, on_progress: Callable[[int], None] | None) -> None:
    loop.read_to_end()
    loop.commit()
    while loop.refits_left and not stop.wanted and not loop.failing:
        loop.turn()
        if on_progress is not None:
            on_progress(loop.refits_left)
        loop.clock.sleep(0.002)


def _remember(plan: Plan, store: Store, path: Path, clock: Clock, log: Log) -> State:
    """State from the store; new settings become a fact."""
    with open_reader(path) as reader:
        _fits(plan, store, reader)
        known = reader.settings_digest()
        state = restore(plan, store.identity.distinct, _remembered(reader), clock.now())
    if known != plan.digest:
        store.commit(
            [
                SettingsTaken(
                    digest=plan.digest, text=plan.text, effective_from=clock.now() // plan.pane * plan.pane + plan.pane,
                    known_at=clock.now(),
                )
            ]
        )  # fmt: skip
        log.info("settings taken" if known is None else "settings changed; they count from the next refit on")
    for key in plan.not_yet:
        log.warning(f"{key} in the settings is understood, but this version does not act on it")
    return state


def _fits(plan: Plan, store: Store, reader: Reader) -> None:
    """Refuse settings that would change what the store's panes mean."""
    if plan.distinct != store.identity.distinct:
        raise SettingsError(
            f"watch.distinct: this store keeps {store.identity.distinct} sizes a pane exactly, for good; the settings "
            f"say {plan.distinct}. Put it back, or name a new store."
        )
    text = reader.settings_text()
    if text is not None:
        held = read_plan(text, "settings in the store").pane
        if held != plan.pane:
            raise SettingsError(
                f"watch.pane: this store's panes are {span_text(held)}; the settings say {span_text(plan.pane)}. "
                "Put it back, or name a new store."
            )


def _remembered(reader: Reader) -> Remembered:
    return Remembered(
        chains=reader.chains(),
        streams=reader.streams(),
        open_panes=[(pane.stream, pane.start) for pane in reader.open_panes()],
        sealed_edges=reader.sealed_edges(),
        watermarks=reader.watermarks(),
        jobs=reader.refit_jobs(),
        baselines=reader.baselines(),
    )
