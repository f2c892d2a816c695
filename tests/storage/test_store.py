"""The writer: whole commits or none, whatever happens; strangers' files refused and left alone."""

from __future__ import annotations

import os
import shutil
import sqlite3
import subprocess
import sys
from collections.abc import Iterator
from pathlib import Path

import numpy as np
import pytest

from storage.audit import canonical_lines, check
from storage.errors import StoreBusy, StoreCorrupt, StoreError, StoreForeign, StoreFull, StoreMissing, StoreNewer
from storage.facts import (
    ChainState,
    Fact,
    Forget,
    PanePart,
    PaneSealed,
    RefitStored,
    RejectedSample,
    StreamState,
)
from storage.gathering import PaneBuilder
from storage.history import open_reader
from storage.pane import digest
from storage.schema import VERSION
from storage.store import PARTS_BEFORE_COMPACTION, SAMPLES_KEPT, Store, open_store

DISTINCT = 50


def opened(path: Path) -> Store:
    return open_store(path, store_id="test", now=1, distinct=DISTINCT)


@pytest.fixture
def path(tmp_path: Path) -> Path:
    return tmp_path / "orders.db"


@pytest.fixture
def store(path: Path) -> Iterator[Store]:
    with opened(path) as store:
        yield store


def step(number: int, *, seal: bool = False) -> list[Fact]:
    """The facts of one commit: a pane part, the stream, the chain's position, perhaps a seal."""
    rng = np.random.default_rng(number)
    builder = PaneBuilder()
    builder.add(np.round(rng.pareto(1.5, 20) + 1, 1), np.arange(20), 1, lambda i: (f"{i:016x}", "here"))
    facts: list[Fact] = [
        PanePart(stream="a", start=0, end=60, content=builder.build(DISTINCT)),
        StreamState(stream="a", feed="f", unit="u", first=0, newest=number, events=20 * number, late=number),
        ChainState(feed="f", chain="c", bookmark=str(number), running_max=number, edge=None, idle=False, waiting=None,
                   lines=20 * number, events=20 * number, late=number, skipped={}, rejected={}),
        RejectedSample(feed="f", chain="c", reason="negative", position=number, text=b"-1", known_at=1),
    ]  # fmt: skip
    if seal:
        facts.append(PaneSealed(stream="a", start=0, end=60, window_start=-60, settings="s", known_at=1))
    return facts


def exported(path: Path) -> list[str]:
    with open_reader(path) as reader:
        return list(canonical_lines(reader))


def test_facts_come_back(store: Store, path: Path) -> None:
    store.commit(step(1))
    store.commit(step(2, seal=True))
    with open_reader(path) as reader:
        (pane,) = reader.panes()
        assert (pane.events, pane.late, pane.start, pane.end) == (40, 2, 0, 60)
        assert [(job.start, job.end) for job in reader.refit_jobs()] == [(-60, 60)]
        window = reader.window("a", 0, 60, 10**6)
        assert (window.panes, window.content.n, digest(window.content)) == (1, 40, pane.digest)
        assert [chain.bookmark for chain in reader.chains()] == ["2"]
        assert reader.open_panes() == []


def test_parts_are_compacted_without_changing_the_sum(path: Path, tmp_path: Path) -> None:
    with opened(path) as store:
        for number in range(PARTS_BEFORE_COMPACTION + 10):
            store.commit(step(number))
        assert store.db.execute("select count(*) from pane_part").fetchone()[0] < 15
        store.commit([PaneSealed(stream="a", start=0, end=60, window_start=0, settings="s", known_at=1)])
    with opened(tmp_path / "once.db") as store:
        store.commit([fact for number in range(PARTS_BEFORE_COMPACTION + 10) for fact in step(number)[:1]])
        store.commit([PaneSealed(stream="a", start=0, end=60, window_start=0, settings="s", known_at=1)])
    with open_reader(path) as one, open_reader(tmp_path / "once.db") as other:
        assert one.panes() == other.panes()


def test_only_the_first_samples_of_a_reason_are_kept(store: Store, path: Path) -> None:
    for number in range(SAMPLES_KEPT + 5):
        store.commit(step(number))
    with open_reader(path) as reader:
        assert [sample.position for sample in reader.rejected_samples()] == list(range(SAMPLES_KEPT))


class _Broken:
    """A connection's statements, of which number `at` fails."""

    def __init__(self, store: Store, at: int) -> None:
        self._execute = store.db.execute
        self._left = at

    def __call__(self, sql: str, *arguments: object) -> object:
        if not sql.startswith(("commit", "rollback")):
            self._left -= 1
            if self._left == 0:
                raise sqlite3.OperationalError("database or disk is full")
        return self._execute(sql, *arguments)  # type: ignore[arg-type]


def test_a_failed_statement_leaves_nothing_behind_and_the_facts_can_be_given_again(path: Path) -> None:
    """The fault loop: fail at statement 1, 2, 3 ... until a commit survives."""
    with opened(path) as store:
        store.commit(step(1))
        before = exported(path)
        failures = 0
        while True:
            failures += 1
            broken = _Broken(store, failures)
            store.db.execute = broken  # type: ignore[method-assign]
            try:
                store.commit(step(2, seal=True))
            except StoreFull:
                del store.db.execute  # type: ignore[method-assign]
                assert exported(path) == before
                continue
            del store.db.execute  # type: ignore[method-assign]
            break
    assert failures > 8
    with opened(path.with_name("clean.db")) as store:
        store.commit(step(1))
        store.commit(step(2, seal=True))
    assert exported(path) == exported(path.with_name("clean.db"))


def _die_at_statement(path: Path, number: int) -> bool:
    """In a child: commit twice and die without a word at a statement. True when it survived."""
    child = os.fork()
    if child == 0:  # pragma: no cover - the child never returns
        left = number

        def count(_: str) -> None:
            nonlocal left
            left -= 1
            if left == 0:
                os._exit(9)

        store = opened(path)
        store.db.conn.set_trace_callback(count)
        store.commit(step(1))
        store.commit(step(2, seal=True))
        os._exit(0)
    _, status = os.waitpid(child, 0)
    return os.waitstatus_to_exitcode(status) == 0


@pytest.mark.filterwarnings("ignore:This process .* is multi-threaded:DeprecationWarning")
def test_a_death_at_any_statement_leaves_whole_commits(tmp_path: Path) -> None:
    stages = []
    for facts in ([], step(1), step(1) + step(2, seal=True)):
        stage = tmp_path / f"stage{len(stages)}.db"
        with opened(stage) as store:
            store.commit(facts[:4])
            store.commit(facts[4:])
        stages.append(exported(stage))
    seen = set()
    for number in range(1, 200):
        path = tmp_path / f"{number}.db"
        survived = _die_at_statement(path, number)
        with opened(path):
            pass
        seen.add(stages.index(exported(path)))  # ValueError: something between two commits
        if survived:
            break
    assert survived
    assert seen == {0, 1, 2}


@pytest.mark.parametrize(
    ("content", "error", "words"),
    [
        (b"", StoreForeign, "empty"),
        (b"units\n1\n2\n", StoreForeign, "not a Tailgauge store"),
        (b"SQLite format 3\0" + b"\0" * 20, StoreForeign, "not a Tailgauge store"),
    ],
)
def test_strange_files_are_refused_and_left_alone(path: Path, content: bytes, error: type, words: str) -> None:
    path.write_bytes(content)
    for attempt in (lambda: opened(path), lambda: open_reader(path)):
        with pytest.raises(error, match=words) as caught:
            attempt()
        assert str(path) in str(caught.value)
    assert path.read_bytes() == content


def test_an_sqlite_file_of_another_program_is_refused(path: Path) -> None:
    connection = sqlite3.connect(path)
    connection.execute("create table notes (text)")
    connection.commit()
    connection.close()
    with pytest.raises(StoreForeign, match="another program"):
        opened(path)


def test_a_newer_store_is_refused(path: Path) -> None:
    with opened(path) as store:
        store.db.execute(f"pragma user_version = {VERSION + 1}")
    with pytest.raises(StoreNewer, match=f"schema {VERSION + 1}"):
        opened(path)


def test_missing_is_told_to_readers_and_made_for_the_writer(path: Path) -> None:
    with pytest.raises(StoreMissing, match="tailgauge run"):
        open_reader(path)
    with pytest.raises(StoreMissing, match="no such folder"):
        opened(path.parent / "nowhere" / "orders.db")


def test_one_writer_at_a_time(store: Store, path: Path) -> None:
    with pytest.raises(StoreBusy, match=f"process {os.getpid()}"):
        opened(path)


def test_a_changed_bit_in_a_pane_is_named(path: Path) -> None:
    with opened(path) as store:
        store.commit(step(1, seal=True))
        blob = bytearray(store.db.execute("select content from pane").fetchone()[0])
        blob[70] ^= 4
        store.db.execute("update pane set content = ?", [bytes(blob)])
        store.db.conn.commit()
    with open_reader(path) as reader, pytest.raises(StoreCorrupt, match=r"pane a at 0.*checksum"):
        reader.window("a", 0, 60, 1000)


def test_a_copy_without_its_log_can_be_read_where_nothing_can_be_written(path: Path, tmp_path: Path) -> None:
    with opened(path) as store:
        store.commit(step(1))
    folder = tmp_path / "archive"
    folder.mkdir()
    shutil.copy(path, folder / "copy.db")
    (folder / "copy.db").chmod(0o400)
    folder.chmod(0o500)
    try:
        assert exported(folder / "copy.db") == exported(path)
    finally:
        folder.chmod(0o700)


def test_a_reader_sees_one_state_in_a_snapshot_while_the_writer_goes_on(store: Store, path: Path) -> None:
    store.commit(step(1))
    with open_reader(path) as reader:
        with reader.snapshot():
            before = reader.streams()
            store.commit(step(2))
            assert reader.streams() == before
        assert reader.streams() != before


@pytest.mark.parametrize(
    ("kind", "code"),
    [(StoreMissing, 66), (StoreBusy, 75), (StoreNewer, 65), (StoreForeign, 65), (StoreCorrupt, 65), (StoreFull, 74)],
)
def test_errors_carry_the_exit_codes_of_the_contract(kind: type[StoreError], code: int) -> None:
    assert kind.exit_code == code


def test_old_panes_and_refits_go_but_not_what_a_kept_refit_reads(path: Path) -> None:
    def refit(start: int, end: int) -> RefitStored:
        return RefitStored(
            id=f"{start}-{end}", stream="a", start=start, end=end, state="done", panes=1, window_digest="",
            settings="s", seed=1, judgement="null", comparison=None, flags="[]", reason=None, attempts=1,
            seconds=0.0, versions="{}", known_at=1,
        )  # fmt: skip

    with opened(path) as store:
        for minute in range(6):
            start = 60 * minute
            builder = PaneBuilder()
            builder.add(np.array([1.0, 2.0]), np.array([start, start]), 0, lambda i: ("00" * 8, "here"))
            store.commit(
                [
                    PanePart(stream="a", start=start, end=start + 60, content=builder.build(DISTINCT)),
                    PaneSealed(stream="a", start=start, end=start + 60, window_start=start, settings="s", known_at=1),
                    StreamState(stream="a", feed="f", unit="u", first=0, newest=start, events=2 * minute + 2, late=0),
                    refit(start, start + 60),
                ]
            )
        store.commit([refit(60, 180)])
        store.commit([Forget(stream="a", panes_before=240, refits_before=120, known_at=1)])
        store.give_back_space(100)
    with open_reader(path) as reader:
        assert sorted((kept.start, kept.end) for kept in reader.refits()) == [
            (60, 180),
            (120, 180),
            (180, 240),
            (240, 300),
            (300, 360),
        ]
        assert [pane.start for pane in reader.panes()] == [60, 120, 180, 240, 300]
        (gone,) = reader.forgotten()
        assert (gone.start, gone.end, gone.panes, gone.events, gone.refits) == (0, 60, 1, 2, 2)
        assert [f.faults for f in check(reader) if f.what == "events of streams"] == [
            ("0 events read, 12 counted in streams",)
        ]


def test_a_damaged_part_is_set_aside_and_the_pane_goes_on(path: Path) -> None:
    with opened(path) as store:
        store.commit(step(1))
        store.commit(step(2))
        blob = bytearray(store.db.execute("select content from pane_part where id = 1").fetchone()[0])
        blob[60] ^= 8
        store.db.execute("update pane_part set content = ? where id = 1", [bytes(blob)])
        store.commit(step(3, seal=True))
        assert len(store.damaged) == 1
        assert "20 events" in store.damaged[0]
    with open_reader(path) as reader:
        assert [pane.events for pane in reader.panes()] == [40]
        faults = {finding.what: finding.faults for finding in check(reader)}
        assert len(faults["damaged parts set aside"]) == 1
        assert faults["events of streams"] == ("a: 60 events counted, 40 in its panes",)


def test_the_last_refits_of_a_stream_are_the_newest_ones(path: Path) -> None:
    def refit(stream: str, end: int) -> RefitStored:
        return RefitStored(
            id=f"{stream}{end}", stream=stream, start=0, end=end, state="done", panes=1, window_digest="", settings="s",
            seed=1, judgement="null", comparison=None, flags="[]", reason=None, attempts=1, seconds=0.0, versions="{}",
            known_at=1,
        )  # fmt: skip

    with opened(path) as store:
        store.commit([refit(stream, end) for stream in "ab" for end in (3, 1, 2)])
    with open_reader(path) as reader:
        assert [r.id for r in reader.refits()] == ["a1", "b1", "a2", "b2", "a3", "b3"]
        assert [r.id for r in reader.refits("a", last=2)] == ["a2", "a3"]
        assert [r.id for r in reader.refits(last=1)] == ["a3", "b3"]
        assert [r.id for r in reader.refits("b", start=2, end=2)] == ["b2"]
        assert reader.refits("c") == []


def test_another_process_does_not_take_the_log_of_an_open_store_for_an_orphan(store: Store, path: Path) -> None:
    """A reader of our own process, opened and closed, must not drop the store's locks (POSIX locks are the process's):
    else the next process that closes the store deletes the log under the writer, and commits are lost."""
    store.commit(step(1))
    with open_reader(path) as reader:
        assert reader.streams()
    code = (
        "import sqlite3, sys; c = sqlite3.connect(sys.argv[1]); c.execute('select count(*) from pane_part').fetchone();"
        "c.close()"
    )
    subprocess.run([sys.executable, "-c", code, str(path)], check=True)
    assert path.with_name(path.name + "-wal").exists()
    store.commit(step(2))
    counted = code.replace("c.close()", "print(c.execute('select count(*) from pane_part').fetchone())")
    found = subprocess.run([sys.executable, "-c", counted, str(path)], check=True, capture_output=True, text=True)
    assert found.stdout.strip() == "(2,)"
