"""Feeds begin with plain parsers and go on with compiled ones once the worker has compiled them."""

from __future__ import annotations

from pathlib import Path

from monitor.cli.output import load_plan
from monitor.engine.stimuli import Outcome
from monitor.parse.compiled import CompiledParser
from monitor.service.clock import SystemClock
from monitor.service.log import Log
from monitor.service.loop import Loop
from monitor.service.run import _open_feeds, _remember
from storage.history import open_reader
from storage.store import open_store

SETTINGS = """
store = "events.db"
[feed.orders]
follow = ["events.jsonl"]
lines = "json"
size = "units"
time = "at"
stream = "dock"
[watch]
pane = "1h"
window = "7d"
"""


class Compiling:
    """A worker that is not ready yet, and never free."""

    ready = False
    busy = True

    def poll(self) -> Outcome | None:
        return None


def lines(first: int, last: int) -> str:
    return "".join(
        f'{{"units":{i % 90 + 1}.5,"at":"2026-12-01T{i // 600:02}:{i // 10 % 60:02}:{i % 10:02}Z","dock":"{i % 3}"}}\n'
        for i in range(first, last)
    )


def test_the_switch_loses_nothing_and_counts_nothing_twice(tmp_path: Path) -> None:
    (tmp_path / "settings.toml").write_text(SETTINGS)
    log = tmp_path / "events.jsonl"
    log.write_text(lines(0, 2000))
    clock, worker = SystemClock(), Compiling()
    plan = load_plan(tmp_path / "settings.toml")
    with open_store(tmp_path / plan.store, store_id="0", now=clock.now(), distinct=plan.distinct) as store:
        state = _remember(plan, store, clock, Log(clock))
        feeds = _open_feeds(plan, tmp_path, state, clock)
        loop = Loop(state, store, feeds, worker, clock=clock, log=Log(clock))  # type: ignore[arg-type]
        while loop.turn():
            pass
        assert not isinstance(feeds[0]._parser, CompiledParser)
        worker.ready = True
        while loop.turn():
            pass
        assert isinstance(feeds[0]._parser, CompiledParser)
        with log.open("a") as file:
            file.write(lines(2000, 4000))
        loop.read_to_end()
        assert loop.commit()
        for feed in feeds:
            feed.close()
    with open_reader(tmp_path / plan.store) as reader:
        counted = {stream.stream: stream.events for stream in reader.streams()}
    assert counted == {"0": 1334, "1": 1333, "2": 1333}
