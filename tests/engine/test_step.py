"""The engine with a real store and no clock: what is kept depends on the lines alone."""

from __future__ import annotations

import random
from collections.abc import Callable, Iterator
from pathlib import Path

import numpy as np
import pytest

from monitor.engine.restore import Remembered, restore
from monitor.engine.state import State
from monitor.engine.step import committed, step
from monitor.engine.stimuli import Arrived, ChainSeen, CommitDue, Ended, Lines
from monitor.plan import Plan, read_plan
from storage.audit import canonical_lines
from storage.facts import Advance, PaneSealed
from storage.history import open_reader
from storage.pane import line_digest
from storage.store import Store, open_store

SECOND = 1_000_000_000
SETTINGS = """
store = "s.db"
[feed.orders]
follow = ["*.log"]
lines = "json"
size = "n"
time = "t"
stream = "dock"
[watch]
pane = "1m"
slot = "10s"
window = "10m"
lateness = "5s"
idle = "1m"
ahead = "2m"
distinct = 16
"""
Event = tuple[float, int, str]  # size, stamp, stream


def plan(text: str = SETTINGS) -> Plan:
    return read_plan(text, "test")


def lines(events: list[Event]) -> Lines:
    names = sorted({event[2] for event in events})
    return Lines(
        count=len(events),
        sizes=np.array([event[0] for event in events]),
        stamps=np.array([event[1] for event in events], np.int64),
        names=names,
        codes=np.array([names.index(event[2]) for event in events], np.int32),
        describe=lambda i: (line_digest(repr(events[i]).encode()), "somewhere"),
    )


def chain_of_events(seed: int, count: int) -> list[Event]:
    """Stamps mostly ascending, some late, a gap, a wild one; few and many distinct sizes."""
    rng = random.Random(seed)
    now = 1000 * SECOND
    out = []
    for _ in range(count):
        now += rng.randrange(0, 2 * SECOND)
        if rng.random() < 0.01:
            now += 10 * 60 * SECOND
        stamp = now - (rng.randrange(0, 20 * SECOND) if rng.random() < 0.1 else 0)
        if rng.random() < 0.01:
            stamp += 10**6 * SECOND
        out.append((round(rng.paretovariate(1.5), 1), stamp, rng.choice("ab")))
    return out


class Run:
    """A store, a state, and the feeding of chains in any rhythm; `crash` forgets what was not committed."""

    def __init__(self, folder: Path, chains: dict[str, list[Event]], text: str = SETTINGS) -> None:
        self.path = folder / "s.db"
        self.chains = chains
        self.plan = plan(text)
        self.now = 10**18
        self.open()

    def open(self) -> None:
        self.store: Store = open_store(self.path, store_id="x", now=self.now, distinct=self.plan.distinct)
        with open_reader(self.path) as reader:
            remembered = Remembered(
                chains=reader.chains(),
                streams=reader.streams(),
                open_panes=[(pane.stream, pane.start) for pane in reader.open_panes()],
                sealed_edges=reader.sealed_edges(),
                watermarks=reader.watermarks(),
                jobs=reader.refit_jobs(),
                baselines=reader.baselines(),
            )
            self.state: State = restore(self.plan, self.plan.distinct, remembered, self.now)
        self.at = dict.fromkeys(self.chains, 0)
        for (_, name), chain in self.state.chains.items():
            self.at[name] = int(chain.bookmark or 0)
        for name in self.chains:
            step(self.state, ChainSeen(feed="orders", chain=name, at_end=False, quiet_since=None, now=self.now))

    def feed(self, name: str, count: int) -> None:
        start = self.at[name]
        self.at[name] = min(start + count, len(self.chains[name]))
        block = lines(self.chains[name][start : self.at[name]])
        if block.count:
            step(
                self.state,
                Arrived(feed="orders", chain=name, lines=block, bookmark=str(self.at[name]), now=self.now),
            )

    def commit(self) -> list[object]:
        facts = step(self.state, CommitDue(now=self.now))
        self.store.commit(facts)
        committed(self.state, facts)
        return list(facts)

    def crash(self) -> None:
        self.store.close()
        self.open()

    def finish(self) -> list[str]:
        for name, events in self.chains.items():
            self.feed(name, len(events))
        step(self.state, Ended(now=self.now))
        self.commit()
        self.store.close()
        with open_reader(self.path) as reader:
            return list(canonical_lines(reader))


Start = Callable[..., Run]


@pytest.fixture
def start() -> Iterator[Start]:
    """Makes runs, and closes their stores at the end."""
    made: list[Run] = []

    def make(folder: Path, chains: dict[str, list[Event]], text: str = SETTINGS) -> Run:
        folder.mkdir(exist_ok=True)
        made.append(Run(folder, chains, text))
        return made[-1]

    yield make
    for run in made:
        run.store.close()


def two_chains(seed: int) -> dict[str, list[Event]]:
    return {"one": chain_of_events(seed, 300), "two": chain_of_events(seed + 1, 200)}


@pytest.mark.parametrize("seed", range(12))
def test_content_depends_on_the_lines_alone(start: Start, tmp_path: Path, seed: int) -> None:
    """Random batches, interleaving, commits and crashes: the same store as in one go."""
    chains = two_chains(seed)
    expected = start(tmp_path / "whole", chains).finish()
    assert sum(line.startswith('{"pane"') for line in expected) > 10
    run = start(tmp_path / "pieces", chains)
    rng = random.Random(seed)
    for _ in range(60):
        choice = rng.random()
        if choice < 0.7:
            run.feed(rng.choice(["one", "two"]), rng.randrange(1, 40))
        elif choice < 0.9:
            run.commit()
        else:
            run.crash()
    assert run.finish() == expected


def test_a_commit_that_separates_positions_from_panes_is_found_out(start: Start, tmp_path: Path) -> None:
    """Negative control: with positions committed but panes lost, the stores must differ."""
    chains = two_chains(3)
    expected = start(tmp_path / "whole", chains).finish()
    run = start(tmp_path / "split", chains)
    run.feed("one", 50)
    facts = step(run.state, CommitDue(now=run.now))
    run.store.commit([fact for fact in facts if type(fact).__name__ == "ChainState"])
    run.crash()
    assert run.finish() != expected


def test_the_accounts_balance(start: Start, tmp_path: Path) -> None:
    run = start(tmp_path, two_chains(5))
    run.feed("one", 137)
    run.commit()
    with open_reader(run.path) as reader:
        for chain in reader.chains():
            waiting = chain.waiting is not None
            assert chain.lines == chain.events + waiting + sum(chain.skipped.values()) + sum(chain.rejected.values())
        held = sum(pane.events for pane in reader.panes()) + sum(pane.events for pane in reader.open_panes())
        assert held == sum(chain.events for chain in reader.chains()) == sum(s.events for s in reader.streams())


def test_a_pane_seals_when_every_chain_has_passed_it(start: Start, tmp_path: Path) -> None:
    minute = 60 * SECOND
    fast = [(1.0, k * SECOND, "a") for k in range(200)]
    slow = [(1.0, k * SECOND, "a") for k in range(200)]
    run = start(tmp_path, {"fast": fast, "slow": slow})
    run.feed("fast", 200)
    run.feed("slow", 64)  # floor: 63 s - 5 s < 1 min
    assert not [fact for fact in run.commit() if isinstance(fact, PaneSealed)]
    run.feed("slow", 2)  # floor: 65 s - 5 s
    sealed = [fact for fact in run.commit() if isinstance(fact, PaneSealed)]
    assert [(fact.start, fact.end, fact.window_start) for fact in sealed] == [(0, minute, -9 * minute)]
    assert [job.end for job in run.state.jobs] == [minute]


def test_a_silent_chain_leaves_the_minimum_and_the_clock_takes_over(start: Start, tmp_path: Path) -> None:
    run = start(tmp_path, {"one": [(1.0, k * SECOND, "a") for k in range(100)], "two": []})
    run.now = 90 * SECOND
    run.feed("one", 100)
    assert not [fact for fact in run.commit() if isinstance(fact, PaneSealed)]  # "two" may still bring anything
    for name in ("one", "two"):
        step(run.state, ChainSeen(feed="orders", chain=name, at_end=True, quiet_since=None, now=run.now))
    run.state.chains["orders", "two"].quiet_since = 0
    facts = run.commit()
    assert [fact.start for fact in facts if isinstance(fact, PaneSealed)] == [0]  # by the lines of "one" alone
    run.now = 400 * SECOND
    facts = run.commit()
    assert [fact.start for fact in facts if isinstance(fact, PaneSealed)] == [60 * SECOND]
    assert [fact.to for fact in facts if isinstance(fact, Advance)] == [340 * SECOND]
    run.crash()
    run.chains["one"].append((7.0, 61 * SECOND, "a"))  # back from idle with a stamp of a sealed pane
    run.feed("one", 1)
    run.commit()
    chain = run.state.chains["orders", "one"]
    assert (chain.edge, chain.idle, chain.late) == (340 * SECOND, False, 1)
    assert run.state.streams["a"].open == {300 * SECOND}


def test_arrival_times_count_every_line_once(start: Start, tmp_path: Path) -> None:
    run = start(tmp_path, {"one": [(1.0, 0, "a")] * 10}, SETTINGS.replace('time = "t"\n', ""))
    for now in (30, 70, 130):
        run.now = now * SECOND
        block = lines(run.chains["one"][:3])
        timeless = Lines(
            count=3, sizes=block.sizes, stamps=None, names=block.names, codes=block.codes, describe=block.describe
        )
        step(run.state, Arrived(feed="orders", chain="one", lines=timeless, bookmark=str(now), now=run.now))
        run.commit()
    with open_reader(run.path) as reader:
        assert [(pane.start // SECOND, pane.events) for pane in reader.panes()] == [(0, 3), (60, 3)]
        assert [(pane.start // SECOND, pane.events) for pane in reader.open_panes()] == [(120, 3)]


def test_streams_beyond_the_cap_are_rejected_and_counted_whatever_the_batches(start: Start, tmp_path: Path) -> None:
    events = [(1.0, k * SECOND, f"s{k % 7}") for k in range(200)]
    text = SETTINGS + "max_streams = 4\n"
    outcomes = []
    for number, size in enumerate((1, 3, 200)):
        run = start(tmp_path / str(number), {"one": events}, text)
        for _ in range(0, 200, size):
            run.feed("one", size)
        outcomes.append(run.finish())
        assert set(run.state.streams) == {"s0", "s1", "s2", "s3"}
        chain = run.state.chains["orders", "one"]
        assert chain.lines == 200 == chain.events + sum(chain.rejected.values())
        assert chain.rejected["one stream too many"] == sum(k % 7 > 3 for k in range(200))
    assert outcomes[0] == outcomes[1] == outcomes[2]
