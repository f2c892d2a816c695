"""What a second of the live screen costs, as ratios in one run.

    python -m tests.benchmarks.screen [streams]

The yardstick is one frame of a store with 5 streams at 80x24. Against it: the same frame of a store with many
streams, a larger terminal, one stream looked at closely, a look at a store that did not change, and reading one
that did. Processor time, the best of several rounds.
"""

from __future__ import annotations

import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

from monitor.cli.watching import StoreWatch
from monitor.render.attention import in_order
from monitor.render.focus import focus_page
from monitor.render.frame import Look
from monitor.render.screen import overview
from tests.stores import (
    NOW,
    alarm,
    chain,
    first_window,
    make,
    quiet_refits,
    settings_fact,
    stream,
    warehouse,
    watch_of,
)

ROUNDS = 7
SMALL, LARGE = Look(width=80, height=24), Look(width=200, height=50)


def store_of(path: Path, streams: int) -> Path:
    """A store with so many quiet streams of 24 refits each, all watched; every tenth has an open alarm."""
    with make(path) as store:
        store.commit([settings_fact(), chain()])
        for i in range(streams):
            name = f"dock-{i:04d}"
            alarms = alarm(name, "body") if i % 10 == 0 else []
            store.commit([stream(name), first_window(name), *quiet_refits(name, 24), *watch_of(name), *alarms])
    return path


def best(work: Callable[[], object], times: int = 20) -> float:
    """Processor seconds of one call, the best of some rounds."""
    rounds = []
    for _ in range(ROUNDS):
        started = time.process_time()
        for _ in range(times):
            work()
        rounds.append((time.process_time() - started) / times)
    return min(rounds)


def frame(watch: StoreWatch, look: Look) -> Callable[[], object]:
    """Making one frame, the order of the streams being at hand as in the live screen."""
    seen = watch.look()
    order = in_order(seen, NOW)
    return lambda: overview(seen, NOW, look, order=order, selected=order[0].stream.name, live=True)


def read_anew(watch: StoreWatch) -> object:
    """A look at a store in which something was committed."""
    watch._version, watch._next_read = None, 0.0
    return watch.look()


def main() -> None:
    """Print the ratios."""
    streams = int(sys.argv[1]) if len(sys.argv) > 1 else 500
    with tempfile.TemporaryDirectory() as folder:
        few = StoreWatch(store_of(Path(folder) / "few.db", 5))
        many = StoreWatch(store_of(Path(folder) / "many.db", streams))
        docks = StoreWatch(warehouse(Path(folder) / "orders.db"))
        close = docks.focus("north-dock")
        yardstick = best(frame(few, SMALL))
        print(f"one frame of 5 streams at 80x24: {yardstick * 1000:.2f} ms, the yardstick")
        for what, work in (
            (f"one frame of {streams} streams at 80x24", frame(many, SMALL)),
            (f"one frame of {streams} streams at 200x50", frame(many, LARGE)),
            ("one stream closely at 200x50", lambda: focus_page(close, docks.look(), NOW, LARGE, live=True)),
            ("its watch at 80x24", lambda: focus_page(close, docks.look(), NOW, SMALL, live=True, side="watch")),
            (f"a look at {streams} streams that did not change", many.look),
            ("reading 5 streams that did", lambda: read_anew(few)),
            (f"reading {streams} streams that did, their refits not", lambda: read_anew(many)),
        ):
            print(f"{what}: {best(work) / yardstick:.2f} times")


if __name__ == "__main__":
    main()
