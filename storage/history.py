"""Read-only questions to a store: what was known, from which data.

Runs beside the daemon, on a copy, or years later.
"""

from __future__ import annotations

import sqlite3
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any
from urllib.parse import quote

import msgspec
from sqlite_utils import Database

from storage.errands import ErrandStood
from storage.errors import StoreCorrupt
from storage.facts import (
    AlarmMoved,
    AlarmStood,
    BaselineSet,
    ChainState,
    ChangeAccepted,
    Forgotten,
    KnownAdded,
    NoteWritten,
    NoticeQueued,
    RefitJob,
    RefitStored,
    RejectedSample,
    Request,
    RuleSpoke,
    StoredPane,
    StreamState,
    WatchBegun,
    WatchStood,
)
from storage.pane import Pane, add, decode
from storage.store import check_file, check_identity, named_errors
from storage.window import Window, sum_window


class PaneRow(msgspec.Struct, frozen=True, kw_only=True):
    """A sealed pane without its content."""

    stream: str
    start: int
    end: int
    events: int
    late: int
    distinct_sizes: int
    resolution: str
    smallest: float
    largest: float
    digest: str


class OpenPane(msgspec.Struct, frozen=True, kw_only=True):
    """A pane that still takes events in."""

    stream: str
    start: int
    end: int
    events: int


class Reader:
    """Answers from one store. Each method is one read; `snapshot` makes several see the same state."""

    def __init__(self, db: Database, path: Path) -> None:
        self.db = db
        self.path = path

    def close(self) -> None:
        """Close the file."""
        self.db.close()

    def __enter__(self) -> Reader:
        return self

    def __exit__(self, *_: object) -> None:
        self.close()

    @contextmanager
    def snapshot(self) -> Iterator[None]:
        """Everything read inside sees one state of the store. Keep it short: it holds the log back."""
        with named_errors(self.path):
            self.db.execute("begin")
            try:
                yield
            finally:
                self.db.execute("rollback")

    def _rows(self, sql: str, *arguments: object) -> list[dict[str, Any]]:
        with named_errors(self.path):
            return list(self.db.query(sql, list(arguments)))

    def meta(self) -> dict[str, str]:
        """Name and fixed properties of the store."""
        return {row["key"]: row["value"] for row in self._rows("select key, value from meta")}

    def settings_text(self, digest: str | None = None) -> str | None:
        """The settings taken last, or those of a digest."""
        rows = self._rows(
            "select text from settings where ? is null or digest = ? order by rowid desc limit 1",
            digest,
            digest,
        )
        return rows[0]["text"] if rows else None

    def settings_digest(self) -> str | None:
        """The digest of the settings taken last."""
        rows = self._rows("select digest from settings order by rowid desc limit 1")
        return rows[0]["digest"] if rows else None

    def streams(self) -> list[StreamState]:
        """All streams, by name."""
        return [
            StreamState(
                stream=row["stream"], feed=row["feed"], unit=row["unit"], first=row["first_ns"],
                newest=row["newest_ns"], events=row["events"], late=row["late"],
            )
            for row in self._rows("select * from stream order by stream")
        ]  # fmt: skip

    def chains(self) -> list[ChainState]:
        """All chains with their positions and accounts."""
        return [
            ChainState(
                **{
                    **row,
                    "idle": bool(row["idle"]),
                    "skipped": msgspec.json.decode(row["skipped"]),
                    "rejected": msgspec.json.decode(row["rejected"]),
                }
            )
            for row in self._rows("select * from chain order by feed, chain")
        ]

    def rejected_samples(self, feed: str | None = None) -> list[RejectedSample]:
        """The rejected lines that were kept, oldest first."""
        return [
            RejectedSample(**row)
            for row in self._rows(
                "select feed, chain, reason, position, text, known_at from rejected_sample"
                " where ? is null or feed = ? order by id",
                feed,
                feed,
            )
        ]

    def watermarks(self) -> dict[str, int]:
        """For each set of feeds, the furthest watermark that came from the clock and not from lines."""
        return {
            row["feeds"]: row["top"] for row in self._rows("select feeds, max(to_ns) as top from advance group by 1")
        }

    def sealed_edges(self) -> dict[str, int]:
        """End of the last sealed pane of each stream."""
        return {
            row["stream"]: row["top"] for row in self._rows("select stream, max(to_ns) as top from pane group by 1")
        }

    def open_panes(self, stream: str | None = None) -> list[OpenPane]:
        """Panes that are not sealed yet, by stream and time."""
        return [
            OpenPane(stream=row["stream"], start=row["from_ns"], end=row["to_ns"], events=row["events"])
            for row in self._rows(
                "select stream, from_ns, to_ns, sum(events) as events from pane_part"
                " where ? is null or stream = ? group by stream, from_ns order by stream, from_ns",
                stream,
                stream,
            )
        ]

    def panes(self, stream: str | None = None, start: int | None = None, end: int | None = None) -> list[PaneRow]:
        """Sealed panes inside [start, end), by stream and time."""
        return [
            PaneRow(**{**_without(row, "from_ns", "to_ns"), "start": row["from_ns"], "end": row["to_ns"]})
            for row in self._rows(
                "select stream, from_ns, to_ns, events, late, distinct_sizes, resolution, smallest, largest, digest"
                " from pane where (?1 is null or stream = ?1) and (?2 is null or from_ns >= ?2)"
                " and (?3 is null or to_ns <= ?3) order by stream, from_ns",
                stream,
                start,
                end,
            )
        ]

    def pane_contents(self, stream: str, start: int, end: int) -> list[StoredPane]:
        """The sealed panes of a stream inside [start, end), by time.

        Raises StoreCorrupt naming the pane whose content does not match its checksum.
        """
        found = []
        for row in self._rows(
            "select from_ns, to_ns, digest, content from pane where stream = ? and from_ns >= ? and to_ns <= ?"
            " order by from_ns",
            stream,
            start,
            end,
        ):
            try:
                content = decode(row["content"])
            except StoreCorrupt as error:
                raise StoreCorrupt(f"{self.path}: pane {stream} at {row['from_ns']}: {error}") from None
            found.append(StoredPane(start=row["from_ns"], end=row["to_ns"], digest=row["digest"], content=content))
        return found

    def window(self, stream: str, start: int, end: int, window_distinct: int) -> Window:
        """The sum of the sealed panes of a stream inside [start, end). Raises StoreCorrupt as pane_contents does."""
        return sum_window(start, end, self.pane_contents(stream, start, end), window_distinct)

    def watches(self, stream: str | None = None) -> list[WatchBegun]:
        """All watches, in the order they came into force."""
        return [
            WatchBegun(**row)
            for row in self._rows(
                "select * from watch where ? is null or stream = ? order by stream, effective_from, rowid",
                stream,
                stream,
            )
        ]

    def watch_states(self) -> list[WatchStood]:
        """Where each stream's watch stands."""
        return [
            WatchStood(**{**_without(row, "at_ns"), "at": row["at_ns"]})
            for row in self._rows("select * from watch_state order by stream")
        ]

    def spoken(self, stream: str | None = None, since: int | None = None) -> list[RuleSpoke]:
        """When which rule spoke, by time."""
        return [
            RuleSpoke(**{**_without(row, "at_ns"), "at": row["at_ns"]})
            for row in self._rows(
                "select * from spoken where (?1 is null or stream = ?1) and (?2 is null or at_ns >= ?2)"
                " order by at_ns, stream, rule",
                stream,
                since,
            )
        ]

    def alarms(self, *, only_open: bool = False) -> list[AlarmStood]:
        """Alarms, newest last."""
        return [
            AlarmStood(**{**row, "open": bool(row["open"])})
            for row in self._rows("select * from alarm where open >= ? order by raised_at, id", int(only_open))
        ]

    def alarm_moves(self, alarm: str | None = None) -> list[AlarmMoved]:
        """The histories of alarms, or of one, by time."""
        return [
            AlarmMoved(**{**_without(row, "at_ns"), "at": row["at_ns"]})
            for row in self._rows(
                "select * from alarm_change where ? is null or alarm = ? order by at_ns, known_at, rowid", alarm, alarm
            )
        ]

    def notices(self) -> list[NoticeQueued]:
        """Everything that was to be told, by time."""
        return [
            NoticeQueued(**{**_without(row, "at_ns"), "at": row["at_ns"]})
            for row in self._rows("select * from notice order by at_ns, id")
        ]

    def errands(self, *, only_waiting: bool = False) -> list[ErrandStood]:
        """Which notice is on its way to whom, or has arrived, in the order they are tried."""
        return [
            ErrandStood(**{**_without(row, "at_ns"), "at": row["at_ns"]})
            for row in self._rows(
                "select * from errand where ? = 0 or state = 'waiting' order by at_ns, notice, receiver",
                int(only_waiting),
            )
        ]

    def notes(self) -> list[NoteWritten]:
        """Notes about moments, by time."""
        return [
            NoteWritten(**{**_without(row, "at_ns"), "at": row["at_ns"]})
            for row in self._rows("select * from note order by at_ns, id")
        ]

    def known_changes(self) -> list[KnownAdded]:
        """Known changes that people declared beside the settings, by time."""
        return [
            KnownAdded(**{**_without(row, "from_ns", "to_ns"), "start": row["from_ns"], "end": row["to_ns"]})
            for row in self._rows("select * from known_change order by from_ns, id")
        ]

    def accepted_changes(self) -> list[ChangeAccepted]:
        """Changes that people accepted as the new normal, in order."""
        return [ChangeAccepted(**row) for row in self._rows("select * from accepted_change order by known_at, rowid")]

    def requests(self, *, only_open: bool = False) -> list[Request]:
        """What people asked for, oldest first."""
        return [
            Request(**{**_without(row, "known_at"), "done": None if row["done"] is None else bool(row["done"])})
            for row in self._rows(
                "select * from request where ? = 0 or done is null order by made_at, rowid", int(only_open)
            )
        ]

    def open_content(self, stream: str, start: int) -> Pane:
        """The content so far of an open pane."""
        distinct = int(self.meta()["distinct"])
        rows = self._rows("select content from pane_part where stream = ? and from_ns = ?", stream, start)
        return add((decode(row["content"]) for row in rows), distinct)

    def forgotten(self) -> list[Forgotten]:
        """What was deleted because it had grown too old, in order."""
        return [
            Forgotten(**{**_without(row, "id", "from_ns", "to_ns"), "start": row["from_ns"], "end": row["to_ns"]})
            for row in self._rows("select * from forgotten order by id")
        ]

    def refit_jobs(self) -> list[RefitJob]:
        """Windows still waiting to be judged, in window order."""
        return [
            RefitJob(stream=row["stream"], start=row["from_ns"], end=row["to_ns"], settings=row["settings"],
                     attempts=row["attempts"])
            for row in self._rows("select * from refit_job order by to_ns, stream")
        ]  # fmt: skip

    def refits(
        self,
        stream: str | None = None,
        start: int | None = None,
        end: int | None = None,
        last: int | None = None,
    ) -> list[RefitStored]:
        """Refits whose window ends inside [start, end], newest last; with `last`, the newest so many a stream."""
        wanted = {"stream = ?": stream, "to_ns >= ?": start, "to_ns <= ?": end}
        given = {clause: value for clause, value in wanted.items() if value is not None}
        where = " and ".join(given) or "true"
        if stream is not None and last is not None:  # read from the end of the index, not the whole history
            sql = f"select *, 1 as place from refit where {where} order by to_ns desc limit ?"
        else:
            sql = (
                "select * from (select *, row_number() over (partition by stream order by to_ns desc) as place"
                f" from refit where {where}) where place <= ifnull(?, place) order by to_ns, stream"
            )
        found = sorted(self._rows(sql, *given.values(), last), key=lambda row: (row["to_ns"], row["stream"]))
        return [
            RefitStored(**{**_without(row, "from_ns", "to_ns", "place"), "start": row["from_ns"], "end": row["to_ns"]})
            for row in found
        ]

    def baselines(self, stream: str | None = None) -> list[BaselineSet]:
        """All baselines, in the order they came into force."""
        return [
            BaselineSet(**{**row, "plausible": None if row["plausible"] is None else bool(row["plausible"])})
            for row in self._rows(
                "select * from baseline where ? is null or stream = ? order by stream, effective_from, rowid",
                stream,
                stream,
            )
        ]


def _without(row: dict[str, Any], *keys: str) -> dict[str, Any]:
    return {key: value for key, value in row.items() if key not in keys}


def open_reader(path: Path) -> Reader:
    """Open a store for reading.

    A copy in a place that cannot be written, without its log, is opened as immutable.
    Raises StoreMissing, StoreForeign, StoreNewer, StoreRefused or StoreCorrupt, naming the file.
    """
    check_file(path)
    address = f"file:{quote(str(path.resolve()))}?mode=ro"
    with named_errors(path):
        connection = _connected(address)
        try:
            try:
                check_identity(connection, path)
                connection.execute("select count(*) from sqlite_schema").fetchone()
            except sqlite3.OperationalError:
                if path.with_name(path.name + "-wal").exists():
                    raise
                # A place that cannot be written: nobody else writes there either.
                connection.close()
                connection = _connected(address + "&immutable=1")
                check_identity(connection, path)
        except BaseException:
            connection.close()
            raise
    return Reader(Database(connection, execute_plugins=False), path)


def _connected(address: str) -> sqlite3.Connection:
    return sqlite3.connect(address, uri=True, isolation_level=None, timeout=10.0)
