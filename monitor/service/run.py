"""Start and end of the daemon: lock, store, feeds, worker, signals."""

from __future__ import annotations

import gc
import os
import signal
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from pathlib import Path
from types import FrameType

import msgspec

from monitor.engine.restore import Remembered, restore
from monitor.engine.state import State
from monitor.errors import MonitorError, SettingsError
from monitor.plan import Plan, read_plan
from monitor.plan.spans import span_text
from monitor.service.calendars import with_calendars
from monitor.service.clock import Clock
from monitor.service.feeds import OpenFeed, must_exist
from monitor.service.log import Log
from monitor.service.loop import Loop
from monitor.service.notify import ServiceManager
from monitor.service.telling import Telling
from monitor.service.worker import Worker
from storage.errors import StoreFull
from storage.facts import SettingsTaken
from storage.history import Reader, open_reader
from storage.store import Store, open_store

GC_THRESHOLD = 50_000
"""New objects between two looks for garbage of the youngest."""
IDLE_SLEEP, BRIEF_SLEEP = 0.1, 0.005


class Stop:
    """Set by signals; asked between two turns: SIGTERM and SIGINT end the daemon, SIGHUP rereads the settings."""

    def __init__(self) -> None:
        self.wanted = False
        self.reread = False

    def __call__(self, number: int, _frame: FrameType | None) -> None:
        if number == signal.SIGHUP:
            self.reread = True
        else:
            self.wanted = True


@contextmanager
def stop_on_signals() -> Iterator[Stop]:
    """The signals of a daemon ask its loop, instead of ending the process."""
    stop = Stop()
    before = {number: signal.signal(number, stop) for number in (signal.SIGTERM, signal.SIGINT, signal.SIGHUP)}
    try:
        yield stop
    finally:
        for number, handler in before.items():
            signal.signal(number, handler)


class Asked(msgspec.Struct, frozen=True, kw_only=True):
    """How the daemon is to run.

    base         the folder that relative paths start from
    finish       read what is there, seal, judge and stop
    reread       gives the plan anew on SIGHUP; raises SettingsError or SourceError; None: SIGHUP does nothing
    on_progress  told the refits left (finish only)
    """

    base: Path
    finish: bool = False
    reread: Callable[[], Plan] | None = None
    on_progress: Callable[[int], None] | None = None


def run_daemon(plan: Plan, asked: Asked, clock: Clock, log: Log) -> None:
    """Follow the plan's feeds until a signal, or with `finish` until everything there is judged.

    Raises StoreError, SourceError or SettingsError; on a clean end everything read is committed.
    """
    path = asked.base / plan.store
    manager = ServiceManager()
    # Everything imported by now stays for good; looking through it for garbage costs a fifth with many streams.
    gc.freeze()
    gc.set_threshold(GC_THRESHOLD)
    store = open_store(path, store_id=os.urandom(8).hex(), now=clock.now(), distinct=plan.distinct)
    with store, stop_on_signals() as stop:
        worker = Worker(path)
        try:
            current: Plan | None = plan
            while current is not None:
                current = _watch(current, asked, _Around(store, worker, clock, log, manager, stop))
                if current is not None:
                    worker.restart()  # what it was judging is still queued, now under the new settings
        finally:
            manager.tell("STOPPING=1")
            worker.stop()
        log.info("stopped; everything read is committed")


@dataclass(frozen=True, slots=True)
class _Around:
    """What stays when settings are reread."""

    store: Store
    worker: Worker
    clock: Clock
    log: Log
    manager: ServiceManager
    stop: Stop


def _watch(plan: Plan, asked: Asked, around: _Around) -> Plan | None:
    """Run on one plan. Returns the plan to go on with after SIGHUP, None at the end."""
    store, clock, log = around.store, around.clock, around.log
    plan = with_calendars(plan, asked.base, clock.now(), log)
    if asked.finish:
        plan = msgspec.structs.replace(plan, receivers=())  # old logs are judged, but nobody is called about them
    state = _remember(plan, store, clock, log)
    feeds = _open_feeds(plan, asked.base, state, clock)
    if any(feed.listen is not None for feed in plan.feeds):
        store.make_durable()
    loop = Loop(state, store, feeds, around.worker, clock=clock, log=log)
    if plan.receivers:
        with open_reader(store.path) as reader:
            loop.telling = Telling(plan, store, reader, asked.base, clock=clock, log=log)
    log.info(f"watching {', '.join(feed.name for feed in plan.feeds)} into {store.path}")
    around.manager.tell(f"READY=1\nSTATUS=watching into {store.path}")
    following: Plan | None = None
    try:
        if asked.finish:
            must_exist(feeds)
            _finish(loop, around.stop, asked.on_progress)
        else:
            following = _follow(loop, asked, around)
    finally:
        for feed in feeds:
            feed.close()
        if loop.telling is not None:
            loop.telling.stop()
    if loop.failing:
        raise StoreFull(f"{store.path}: the last commit failed. What was read since the one before is read again.")
    return following


def _open_feeds(plan: Plan, base: Path, state: State, clock: Clock) -> list[OpenFeed]:
    bookmarks: dict[str, dict[str, str]] = {}
    for (feed, chain), known in state.chains.items():
        bookmarks.setdefault(feed, {})[chain] = known.bookmark
    return [OpenFeed(feed, base, bookmarks.get(feed.name, {}), clock) for feed in plan.feeds]


def _follow(loop: Loop, asked: Asked, around: _Around) -> Plan | None:
    """Turn until a signal. Returns the new plan after a SIGHUP that brought a good one."""
    stop, clock = around.stop, around.clock
    following: Plan | None = None
    while not stop.wanted and following is None:
        active = loop.turn()
        around.manager.alive(clock.monotonic())
        if stop.reread:
            stop.reread = False
            following = _reread(loop, asked, around)
        elif not active and not stop.wanted:
            clock.sleep(BRIEF_SLEEP if loop.hurried else IDLE_SLEEP)
    loop.commit()
    return following


def _reread(loop: Loop, asked: Asked, around: _Around) -> Plan | None:
    """The settings anew, if they are good and differ; bad ones are told, and the old ones go on."""
    if asked.reread is None:
        return None
    try:
        plan = asked.reread()
        with open_reader(around.store.path) as reader:
            _fits(plan, around.store, reader)
        if plan.store != loop.state.plan.store:
            raise SettingsError(
                "store: cannot change while the daemon runs. Stop it and start it with the new settings."
            )
    except MonitorError as error:
        around.log.error(f"settings not taken, the old ones stay in force: {error}")
        return None
    if plan.digest == loop.state.plan.digest:
        around.log.info("settings read again: nothing changed")
        return None
    return plan


def _finish(loop: Loop, stop: Stop, on_progress: Callable[[int], None] | None) -> None:
    loop.read_to_end()
    loop.commit()
    while loop.refits_left and not stop.wanted and not loop.failing:
        loop.turn()
        if on_progress is not None:
            on_progress(loop.refits_left)
        loop.clock.sleep(0.002)


def _remember(plan: Plan, store: Store, clock: Clock, log: Log) -> State:
    """State from the store; new settings become a fact."""
    with open_reader(store.path) as reader:
        _fits(plan, store, reader)
        known = reader.settings_digest()
        state = restore(plan, store.identity.distinct, remembered(reader), clock.now())
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


def remembered(reader: Reader) -> Remembered:
    return Remembered(
        chains=reader.chains(),
        streams=reader.streams(),
        open_panes=[(pane.stream, pane.start) for pane in reader.open_panes()],
        sealed_edges=reader.sealed_edges(),
        watermarks=reader.watermarks(),
        jobs=reader.refit_jobs(),
        baselines=reader.baselines(),
        watches=reader.watches(),
        watch_states=reader.watch_states(),
        open_alarms=reader.alarms(only_open=True),
        known_changes=reader.known_changes(),
        accepted=reader.accepted_changes(),
    )
