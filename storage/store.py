"""The one writer: opens the store, holds its lock, and commits facts in one transaction each.

Feed positions and everything learnt from the lines before them go into the same transaction, so that a
process killed at any instant leaves either both or neither. Readers (storage.history) run beside it.
"""

from __future__ import annotations

import fcntl
import os
import sqlite3
import stat
from collections import Counter
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from pathlib import Path
from typing import Any, TextIO

import msgspec
from sqlite_utils import Database

from storage import pane as panes
from storage.errands import ErrandStood
from storage.errors import (
    StoreBusy,
    StoreCorrupt,
    StoreError,
    StoreForeign,
    StoreFull,
    StoreMissing,
    StoreNewer,
    StoreRefused,
)
from storage.facts import (
    Advance,
    AlarmMoved,
    AlarmStood,
    BaselineSet,
    ChainState,
    ChangeAccepted,
    Fact,
    Forget,
    KnownAdded,
    NoteWritten,
    NoticeQueued,
    PanePart,
    PaneSealed,
    RefitRetried,
    RefitStored,
    RejectedSample,
    RequestAnswered,
    RuleSpoke,
    SettingsTaken,
    StreamState,
    WatchBegun,
    WatchStood,
)
from storage.grid import CELLS_PER_DECADE
from storage.schema import APPLICATION_ID, VERSION, migrations
from storage.window import digest_of_panes

PARTS_BEFORE_COMPACTION = 64
SAMPLES_KEPT = 20
"""Rejected lines kept a chain and reason: the first ones."""


class StoreIdentity(msgspec.Struct, frozen=True, kw_only=True):
    """What is fixed for the life of a store: its name, and how sizes are kept."""

    store_id: str
    distinct: int
    created_at: int


def check_file(path: Path) -> None:
    """Refuse what cannot be a store of ours, by what the file system tells alone.

    The file is not opened: closing it again would drop the locks that SQLite holds on it in this process (POSIX
    advisory locks belong to the process, not to the descriptor), and another process would then take our log for an
    orphan's and delete it.
    Raises StoreMissing, StoreForeign or StoreRefused, each naming the file.
    """
    try:
        status = path.stat()
    except FileNotFoundError:
        raise StoreMissing(f"{path}: there is no store here. `tailgauge run SETTINGS` makes one.") from None
    except OSError as error:
        raise StoreRefused(f"{path}: cannot be looked at ({error.strerror}).") from None
    if not stat.S_ISREG(status.st_mode):
        raise StoreRefused(f"{path}: is not a file. Name the store's file.")
    if not os.access(path, os.R_OK):
        raise StoreRefused(f"{path}: cannot be opened (permission denied).")
    if status.st_size == 0:
        raise StoreForeign(f"{path}: the file is empty, not a store. Move it away, or name another file.")


def check_identity(connection: sqlite3.Connection, path: Path) -> None:
    """Refuse a file that is not ours, or of a later version, without changing it.

    Raises StoreForeign or StoreNewer, naming the file.
    """
    try:
        application = connection.execute("pragma application_id").fetchone()[0]
        version = connection.execute("pragma user_version").fetchone()[0]
    except sqlite3.OperationalError:
        raise  # busy, unreadable: told by named_errors
    except sqlite3.DatabaseError:
        raise StoreForeign(
            f"{path}: this is not a Tailgauge store. Name another file; this one was left as it is."
        ) from None
    if application != APPLICATION_ID:
        raise StoreForeign(f"{path}: an SQLite file of another program. Name another file; this one was left as it is.")
    if version > VERSION:
        raise StoreNewer(
            f"{path}: written by a later Tailgauge (schema {version}, this one knows {VERSION}). Use that version."
        )


@contextmanager
def named_errors(path: Path) -> Iterator[None]:
    """Turn SQLite's errors into ours, which name the file and the way out."""
    try:
        yield
    except sqlite3.OperationalError as error:
        text = str(error)
        if "full" in text or "disk I/O" in text:
            raise StoreFull(f"{path}: writing failed ({text}). Free some space; nothing committed was lost.") from error
        if "locked" in text or "busy" in text:
            raise StoreBusy(f"{path}: another process keeps the store locked ({text}).") from error
        if "readonly" in text or "unable to open" in text:
            raise StoreRefused(
                f"{path}: cannot be written ({text}). Check owner and rights of file and folder."
            ) from error
        raise StoreError(f"{path}: {text}.") from error
    except sqlite3.DatabaseError as error:
        raise StoreCorrupt(f"{path}: the file is damaged ({error}). Restore it from a backup.") from error


class Store:
    """The open store. Use `open_store`; close it, or use it in a `with`."""

    def __init__(self, path: Path, lock: TextIO) -> None:
        self.path = path
        self._lock = lock
        self.damaged: list[str] = []
        """Sentences about damaged parts that were set aside; the caller tells them and empties the list."""
        with named_errors(path):
            connection = sqlite3.connect(str(path), isolation_level=None, timeout=10.0)
            try:
                check_identity(connection, path)
            except BaseException:
                connection.close()
                raise
            self.db = Database(connection, execute_plugins=False)
            connection.execute("pragma journal_mode = wal")
            connection.execute("pragma synchronous = normal")
            connection.execute("pragma foreign_keys = on")
            self._migrate()
            self._parts = Counter(
                {(row[0], row[1]): row[2] for row in self.db.execute(
                    "select stream, from_ns, count(*) from pane_part group by stream, from_ns")})  # fmt: skip
            self.identity = self._identity()

    def make_durable(self) -> None:
        """From now on a commit has reached the disk when it returns, not only the operating system.

        Files can be read again after a power cut; what a sender was told is counted cannot.
        """
        with named_errors(self.path):
            self.db.execute("pragma synchronous = full")

    def _migrate(self) -> None:
        version = self.db.execute("pragma user_version").fetchone()[0]
        if version < VERSION:
            migrations.apply(self.db)
            self.db.execute(f"pragma user_version = {VERSION}")

    def _identity(self) -> StoreIdentity:
        meta = dict(self.db.execute("select key, value from meta").fetchall())
        return StoreIdentity(
            store_id=meta["store_id"], distinct=int(meta["distinct"]), created_at=int(meta["created_at"])
        )

    def __enter__(self) -> Store:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    def close(self) -> None:
        """Close the file and give the lock back."""
        self.db.close()
        self._lock.close()

    def commit(self, facts: Sequence[Fact]) -> None:
        """Write facts in one transaction, in the order that their tables need.

        Raises StoreFull or another StoreError; then nothing of this commit is in the store, and the same
        facts may be given again.
        """
        if not facts:
            return
        with named_errors(self.path):
            parts = self._parts.copy()
            self.db.execute("begin immediate")
            try:
                for kind, write in self._writers():
                    chosen = [fact for fact in facts if type(fact) is kind]
                    if chosen:
                        write(chosen)
                self.db.execute("commit")
            except BaseException:
                self._parts = parts
                if self.db.conn.in_transaction:
                    self.db.execute("rollback")
                raise

    def _writers(self) -> Sequence[tuple[type[Fact], Any]]:
        return (
            (SettingsTaken, self._put_settings),
            (StreamState, self._put_streams),
            (Advance, self._put_advances),
            (PanePart, self._put_parts),
            (PaneSealed, self._seal),
            (ChainState, self._put_chains),
            (RejectedSample, self._put_samples),
            (RefitStored, self._put_refits),
            (RefitRetried, self._put_retries),
            (BaselineSet, self._put_baselines),
            (WatchBegun, self._put_watches),
            (WatchStood, self._put_watch_states),
            (RuleSpoke, self._put_spoken),
            (AlarmStood, self._put_alarms),
            (AlarmMoved, self._put_moves),
            (NoticeQueued, self._put_notices),
            (ErrandStood, self._put_errands),
            (NoteWritten, self._put_notes),
            (KnownAdded, self._put_known),
            (ChangeAccepted, self._put_accepted),
            (RequestAnswered, self._put_answers),
            (Forget, self._forget),
        )

    def _put_settings(self, facts: list[SettingsTaken]) -> None:
        self.db["settings"].insert_all(msgspec.to_builtins(fact) for fact in facts)

    def _put_streams(self, facts: list[StreamState]) -> None:
        rows = [
            {
                "stream": fact.stream, "feed": fact.feed, "unit": fact.unit, "first_ns": fact.first,
                "newest_ns": fact.newest, "events": fact.events, "late": fact.late,
            }
            for fact in facts
        ]  # fmt: skip
        self._insert("stream", rows, replace=True)

    def _put_advances(self, facts: list[Advance]) -> None:
        self.db["advance"].insert_all(
            {"feeds": fact.feeds, "to_ns": fact.to, "known_at": fact.known_at} for fact in facts
        )

    def _put_parts(self, facts: list[PanePart]) -> None:
        rows = [
            {
                "stream": fact.stream, "from_ns": fact.start, "to_ns": fact.end, "events": fact.content.n,
                "content": panes.encode(fact.content),
            }
            for fact in facts
        ]  # fmt: skip
        self._insert("pane_part", rows)
        for fact in facts:
            key = (fact.stream, fact.start)
            self._parts[key] += 1
            if self._parts[key] > PARTS_BEFORE_COMPACTION:
                self._compact(fact)

    def _insert(self, table: str, rows: list[dict[str, Any]], *, replace: bool = False) -> None:
        """Insert rows of the same plain columns: where there may be thousands, looking at each value costs too much."""
        if rows:
            names, how = list(rows[0]), "insert or replace" if replace else "insert"
            values = ", ".join(f":{name}" for name in names)
            self.db.conn.executemany(f"{how} into {table} ({', '.join(names)}) values ({values})", rows)

    def _sum_of_parts(self, stream: str, start: int, now: int) -> panes.Pane:
        """The pane so far. A damaged part is set aside, so that one bad block does not stop the watch."""
        found = []
        for row in self.db.execute(
            "select id, events, content from pane_part where stream = ? and from_ns = ?", [stream, start]
        ).fetchall():
            try:
                found.append(panes.decode(row[2]))
            except StoreCorrupt as error:
                aside = {"stream": stream, "from_ns": start, "events": row[1], "reason": str(error), "content": row[2],
                         "known_at": now}  # fmt: skip
                self.db["quarantine"].insert(aside)
                self.damaged.append(
                    f"{self.path}: a part of the pane {stream} at {start} with {row[1]} events: {error}"
                )
        return panes.add(found, self.identity.distinct)

    def _compact(self, part: PanePart) -> None:
        stream, start, end = part.stream, part.start, part.end
        total = self._sum_of_parts(stream, start, 0)
        self.db.execute("delete from pane_part where stream = ? and from_ns = ?", [stream, start])
        self._parts[stream, start] = 0
        self._put_parts([PanePart(stream=stream, start=start, end=end, content=total)])

    def _seal(self, facts: list[PaneSealed]) -> None:
        rows, jobs = [], []
        for fact in facts:
            total = self._sum_of_parts(fact.stream, fact.start, fact.known_at)
            digest, blob = panes.digest_and_blob(total)
            rows.append(
                {
                    "stream": fact.stream, "from_ns": fact.start, "to_ns": fact.end, "events": total.n,
                    "late": total.late, "distinct_sizes": int(total.sizes.size), "resolution": total.resolution,
                    "smallest": total.smallest, "largest": total.largest, "digest": digest,
                    "content": blob, "known_at": fact.known_at,
                }
            )  # fmt: skip
            jobs.append(
                {
                    "stream": fact.stream, "from_ns": fact.window_start, "to_ns": fact.end,
                    "settings": fact.settings, "attempts": 0,
                }
            )  # fmt: skip
            self._parts.pop((fact.stream, fact.start), None)
        self.db.conn.executemany(
            "delete from pane_part where stream = ? and from_ns = ?", [(fact.stream, fact.start) for fact in facts]
        )
        self._insert("pane", rows)
        self._insert("refit_job", jobs)

    def _put_chains(self, facts: list[ChainState]) -> None:
        self.db["chain"].insert_all(
            (
                {
                    **msgspec.structs.asdict(fact),
                    "idle": int(fact.idle),
                    "skipped": canonical_json(fact.skipped),
                    "rejected": canonical_json(fact.rejected),
                }
                for fact in facts
            ),
            replace=True,
        )

    def _put_samples(self, facts: list[RejectedSample]) -> None:
        for fact in facts:
            kept = self.db.execute(
                "select count(*) from rejected_sample where feed = ? and chain = ? and reason = ?",
                [fact.feed, fact.chain, fact.reason],
            ).fetchone()[0]
            if kept < SAMPLES_KEPT:
                self.db["rejected_sample"].insert(msgspec.structs.asdict(fact))

    def _put_refits(self, facts: list[RefitStored]) -> None:
        for fact in facts:
            row = msgspec.structs.asdict(fact)
            row["from_ns"], row["to_ns"] = row.pop("start"), row.pop("end")
            self.db["refit"].insert(row, replace=True)
            self.db.execute("delete from refit_job where stream = ? and to_ns = ?", [fact.stream, fact.end])

    def _put_retries(self, facts: list[RefitRetried]) -> None:
        for fact in facts:
            self.db.execute(
                "update refit_job set attempts = ? where stream = ? and to_ns = ?",
                [fact.attempts, fact.stream, fact.end],
            )

    def _put_baselines(self, facts: list[BaselineSet]) -> None:
        for fact in facts:
            row = msgspec.structs.asdict(fact)
            if fact.plausible is not None:
                row["plausible"] = int(fact.plausible)
            self.db["baseline"].insert(row, replace=True)

    def _put_watches(self, facts: list[WatchBegun]) -> None:
        self.db["watch"].insert_all((msgspec.structs.asdict(fact) for fact in facts), replace=True)

    def _put_watch_states(self, facts: list[WatchStood]) -> None:
        self.db["watch_state"].insert_all((_renamed(fact, at="at_ns") for fact in facts), replace=True)

    def _put_spoken(self, facts: list[RuleSpoke]) -> None:
        self.db["spoken"].insert_all((_renamed(fact, at="at_ns") for fact in facts), replace=True)

    def _put_alarms(self, facts: list[AlarmStood]) -> None:
        for fact in facts:  # one after the other: the last state of an alarm counts
            self.db["alarm"].insert({**msgspec.structs.asdict(fact), "open": int(fact.open)}, replace=True)

    def _put_moves(self, facts: list[AlarmMoved]) -> None:
        self.db["alarm_change"].insert_all((_renamed(fact, at="at_ns") for fact in facts), replace=True)

    def _put_notices(self, facts: list[NoticeQueued]) -> None:
        self.db["notice"].insert_all((_renamed(fact, at="at_ns") for fact in facts), ignore=True)

    def _put_errands(self, facts: list[ErrandStood]) -> None:
        for fact in facts:  # one after the other: the last state of an errand counts
            self.db["errand"].insert(_renamed(fact, at="at_ns"), replace=True)

    def _put_notes(self, facts: list[NoteWritten]) -> None:
        self.db["note"].insert_all((_renamed(fact, at="at_ns") for fact in facts), replace=True)

    def _put_known(self, facts: list[KnownAdded]) -> None:
        self.db["known_change"].insert_all(
            (_renamed(fact, start="from_ns", end="to_ns") for fact in facts), replace=True
        )

    def _put_accepted(self, facts: list[ChangeAccepted]) -> None:
        self.db["accepted_change"].insert_all((msgspec.structs.asdict(fact) for fact in facts), replace=True)

    def open_requests(self) -> list[tuple[str, str, str | None]]:
        """(id, act, alarm as it stands or None) of what people asked for and nobody answered yet, oldest first."""
        with named_errors(self.path):
            return list(
                self.db.execute(
                    "select request.id, act, alarm.alarm from request"
                    " left join alarm on alarm.id = json_extract(act, '$.alarm')"
                    " where done is null order by made_at, request.rowid"
                ).fetchall()
            )

    def notice(self, notice: str) -> tuple[str, str, int, str] | None:
        """(stream, kind, at, data) of a notice, None when it is not there."""
        with named_errors(self.path):
            found: tuple[str, str, int, str] | None = self.db.execute(
                "select stream, kind, at_ns, data from notice where id = ?", [notice]
            ).fetchone()
        return found

    def _put_answers(self, facts: list[RequestAnswered]) -> None:
        for fact in facts:
            self.db.execute(
                "update request set done = ?, answer = ?, known_at = ? where id = ?",
                [int(fact.done), fact.answer, fact.known_at, fact.id],
            )

    def _forget(self, facts: list[Forget]) -> None:
        for fact in facts:
            refits, panes_gone = self._forget_refits(fact), self._forget_panes(fact)
            if refits or panes_gone:
                gone = {
                    "stream": fact.stream, "from_ns": min((row[0] for row in panes_gone), default=0),
                    "to_ns": max((row[1] for row in panes_gone), default=0), "panes": len(panes_gone),
                    "events": sum(row[2] for row in panes_gone), "refits": refits,
                    "digest": digest_of_panes(row[3] for row in panes_gone), "known_at": fact.known_at,
                }  # fmt: skip
                self.db["forgotten"].insert(gone)

    def _forget_refits(self, fact: Forget) -> int:
        if fact.refits_before is None:
            return 0
        deleted = self.db.execute(
            "delete from refit where stream = ? and to_ns <= ?"
            " and id not in (select refit from baseline where refit is not null)",
            [fact.stream, fact.refits_before],
        )
        return int(deleted.rowcount)

    def _forget_panes(self, fact: Forget) -> list[tuple[int, int, int, str]]:
        """Returns (from, to, events, digest) of each pane deleted."""
        if fact.panes_before is None:
            return []
        unread = (
            "stream = ?1 and to_ns <= ?2"
            " and not exists (select 1 from refit where refit.stream = pane.stream"
            "   and refit.from_ns <= pane.from_ns and refit.to_ns >= pane.to_ns)"
            " and not exists (select 1 from refit_job where refit_job.stream = pane.stream"
            "   and refit_job.from_ns <= pane.from_ns and refit_job.to_ns >= pane.to_ns)"
        )
        arguments = [fact.stream, fact.panes_before]
        rows: list[tuple[int, int, int, str]] = self.db.execute(
            f"select from_ns, to_ns, events, digest from pane where {unread} order by from_ns", arguments
        ).fetchall()
        self.db.execute(f"delete from pane where {unread}", arguments)
        return rows

    def give_back_space(self, pages: int) -> None:
        """Return up to `pages` free pages to the file system; a little at a time, so that nothing waits for it."""
        with named_errors(self.path):
            self.db.executescript(f"pragma incremental_vacuum({int(pages)});")


def _renamed(fact: Fact, **columns: str) -> dict[str, Any]:
    """A fact as a row, some of its fields under the names of their columns."""
    row = msgspec.structs.asdict(fact)
    return {columns.get(field, field): value for field, value in row.items()}


def canonical_json(value: object) -> str:
    """JSON with sorted keys and no spaces: equal values have equal texts."""
    return msgspec.json.encode(value, order="deterministic").decode()


def open_store(path: Path, *, store_id: str, now: int, distinct: int) -> Store:
    """Open the store for writing, making it when it is absent.

    Parameters: store_id, a name for a new store (the caller brings the randomness); now, ns; distinct, how
    many different sizes a pane keeps exactly, fixed when the store is made.
    Raises StoreBusy when another process writes it, and the errors of check_file.
    """
    lock = _take_lock(path)
    try:
        if not path.exists():
            _create(path, StoreIdentity(store_id=store_id, distinct=distinct, created_at=now))
        check_file(path)
        return Store(path, lock)
    except BaseException:
        lock.close()
        raise


def _take_lock(path: Path) -> TextIO:
    lock_path = path.with_name(path.name + ".lock")
    try:
        descriptor = os.open(lock_path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o600)
    except FileNotFoundError:
        raise StoreMissing(f"{path.parent}: there is no such folder. Make it, or name another store.") from None
    except OSError as error:
        raise StoreRefused(
            f"{lock_path}: cannot be made ({error.strerror}). The store's folder must be writable."
        ) from None
    lock = os.fdopen(descriptor, "r+")
    try:
        fcntl.flock(lock, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        holder = lock.read().strip()
        lock.close()
        raise StoreBusy(
            f"{path}: another daemon writes it (process {holder or 'unknown'}). Stop that one first."
        ) from None
    lock.seek(0)
    lock.truncate()
    lock.write(f"{os.getpid()}\n")
    lock.flush()
    return lock


def _create(path: Path, identity: StoreIdentity) -> None:
    """Make the file whole under another name first: a crash here must not leave an empty store behind."""
    new = path.with_name(path.name + ".new")
    new.unlink(missing_ok=True)
    with named_errors(path):
        try:
            os.close(os.open(new, os.O_RDWR | os.O_CREAT | os.O_EXCL, 0o600))
        except OSError as error:
            raise StoreRefused(f"{path}: cannot be made ({error.strerror}).") from None
        db = Database(sqlite3.connect(str(new), isolation_level=None), execute_plugins=False)
        db.execute(f"pragma application_id = {APPLICATION_ID}")
        db.execute("pragma auto_vacuum = incremental")
        migrations.apply(db)
        db.execute(f"pragma user_version = {VERSION}")
        meta = {
            "store_id": identity.store_id, "distinct": str(identity.distinct),
            "created_at": str(identity.created_at), "cells_per_decade": str(CELLS_PER_DECADE),
        }  # fmt: skip
        db["meta"].insert_all({"key": key, "value": value} for key, value in meta.items())
        db.close()
    os.replace(new, path)
