"""Speed of the whole intake, as ratios in one run: followed file, parsing, lateness, panes and commits.

    python -m tests.benchmarks.daemon [lines]

JSON lines of 143 bytes with three fields (size, time, stream); the worker is off, since its refits run in a process
of their own. Yardsticks are `for line in file: json.loads(line)` and counting newlines in large reads of the same
file. Rounds alternate between all candidates, and the best round of each counts, in processor time, so that a busy
machine disturbs little. Compiled parsers are loaded before.
"""

from __future__ import annotations

import json
import random
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np

from monitor.cli.output import load_plan
from monitor.engine.stimuli import Outcome
from monitor.parse import warm_parsers
from monitor.service.clock import SystemClock
from monitor.service.log import Log
from monitor.service.loop import Loop
from monitor.service.run import _open_feeds, _remember
from storage.gathering import PaneBuilder
from storage.history import open_reader
from storage.store import open_store
from tests.benchmarks.intake import one_line

ROUNDS = 3
STREAMS = (1, 10, 100, 1000, 10_000)
SETTINGS = """
store = "events.db"
[feed.orders]
follow = ["events.jsonl"]
lines = "json"
size = "units"
time = "placed_at"
stream = "dock"
[watch]
pane = "1d"
window = "7d"
max_streams = 20000
"""


class NoWorker:
    """A worker that is never free."""

    ready = True
    busy = True

    def poll(self) -> Outcome | None:
        """Nothing ever."""
        return None


def prepared(base: Path, name: str, n: int, *, streams: int, bad: float = 0.0) -> Path:
    """A folder with settings and a file of n lines; a share of them broken."""
    folder = base / name
    folder.mkdir()
    (folder / "settings.toml").write_text(SETTINGS)
    chance = random.Random(7)
    with (folder / "events.jsonl").open("w") as file:
        for i in range(n):
            line = one_line("json", i, 20 * chance.paretovariate(1.5), f"dock-{chance.randrange(streams):05}")
            if bad and chance.random() < bad:
                line = chance.choice([line[: len(line) // 2], "", line.replace(".", "!"), "\t" + line + '"'])
            file.write(line + "\n")
    return folder


def take_in(folder: Path) -> tuple[float, int]:
    """One whole intake into a new store: processor seconds, and the events in it."""
    for file in folder.glob("events.db*"):
        file.unlink()
    clock = SystemClock()
    log = Log(clock)
    plan = load_plan(folder / "settings.toml")
    with open_store(folder / plan.store, store_id="0", now=clock.now(), distinct=plan.distinct) as store:
        state = _remember(plan, store, clock, log)
        feeds = _open_feeds(plan, folder, state, clock)
        loop = Loop(state, store, feeds, NoWorker(), clock=clock, log=log)  # type: ignore[arg-type]
        for feed in feeds:
            feed.use_compiled_parser()
        start = time.process_time()
        loop.read_to_end()
        loop.commit()
        seconds = time.process_time() - start
        for feed in feeds:
            feed.close()
    with open_reader(folder / plan.store) as reader:
        return seconds, sum(stream.events for stream in reader.streams())


def json_loop(file: Path) -> None:
    with file.open() as lines:
        for line in lines:
            json.loads(line)


def newlines(file: Path) -> None:
    with file.open("rb") as data:
        while block := data.read(1 << 22):
            block.count(b"\n")


def update_costs() -> dict[str, Callable[[], int]]:
    """Panes updated in blocks of several sizes, and then built; each gives the number of events."""
    sizes = np.round(20 * (np.random.default_rng(3).pareto(1.5, 400_000) + 1), 2)
    times = np.arange(sizes.size)

    def update(block: int) -> int:
        builder = PaneBuilder()
        for at in range(0, sizes.size, block):
            builder.add(sizes[at : at + block], times[at : at + block], 0, lambda i: ("00" * 8, ""))
            builder.build(1 << 14)
        return sizes.size

    return {f"pane, blocks of {block}": (lambda block=block: update(block)) for block in (7000, 20_000, 50_000)}  # type: ignore[misc]


def timed(run: Callable[[], object]) -> float:
    start = time.process_time()
    run()
    return time.process_time() - start


def main(n: int) -> None:
    """Measure and print the table."""
    warm_parsers()
    with tempfile.TemporaryDirectory() as name:
        base = Path(name)
        folders = {f"{s} streams": prepared(base, str(s), n, streams=s) for s in STREAMS}
        folders["10 streams, 1 % bad"] = prepared(base, "bad", n, streams=10, bad=0.01)
        best = dict.fromkeys(["json.loads loop", "count newlines", *folders, *update_costs()], float("inf"))
        events = dict.fromkeys(folders, 0)
        clean = folders["10 streams"] / "events.jsonl"
        for _ in range(ROUNDS):
            found = {
                "json.loads loop": timed(lambda: json_loop(clean)),
                "count newlines": timed(lambda: newlines(clean)),
            }
            for label, folder in folders.items():
                found[label], events[label] = take_in(folder)
            for label, update in update_costs().items():
                found[label] = timed(update) * n / 400_000
            best = {label: min(seconds, found[label]) for label, seconds in best.items()}
    for label, seconds in best.items():
        print(
            f"{label:<24} {seconds / n * 1e9:7.0f} ns a line {best['json.loads loop'] / seconds:7.1f} x json.loads"
            f" {seconds / best['count newlines']:7.1f} x newlines"
            + (f"   {events[label]} events" if label in events else "")
        )


if __name__ == "__main__":
    main(int(sys.argv[1]) if len(sys.argv) > 1 else 400_000)
