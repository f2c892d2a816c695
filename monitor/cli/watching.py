"""The store as the screen sees it: read again only when something was committed.

SQLite's data_version tells whether another process committed since the last look; while it stands still, nothing
is read. Refits are read again only when a row was added, panes only when the focused refit changes.
"""

from __future__ import annotations

import os
import time
from collections import Counter
from pathlib import Path
from types import TracebackType
from typing import Any

import numpy as np

from monitor.alarms.alarm import Alarm
from monitor.cli.output import open_place, plan_of
from monitor.cli.reading import begun_watch, decoded, decoded_alarm, standing_watch, unknown_stream
from monitor.plan import Plan
from monitor.render.charts import TailDrawing
from monitor.render.focus import Focused
from monitor.render.planned import baseline_tails, fitted_tails
from monitor.render.seen import Refit, Seen, StreamSeen, WatchSeen, accounts
from monitor.render.stream_rows import STRIP
from monitor.render.watch_lines import AlarmPast, notes_near
from storage.errors import StoreError
from storage.facts import BaselineSet, StreamState
from storage.history import Reader
from storage.store import named_errors

PAST_ALARMS = 8
"""Alarms of a stream that its page tells of at most, the open ones included."""

REST = 40.0
"""Rest after each read, in times what it took: reading takes at most 1/40 of a core, however large the store."""


class StoreWatch:
    """A store that is looked at again and again. Close it, or use it in a `with`.

    Opening raises what open_place raises; later looks raise StoreError while the store cannot be read.
    """

    def __init__(self, place: Path) -> None:
        self._place = place
        self._reader: Reader | None = open_place(place)
        self._file = _identity(self._reader.path)
        self._forget()

    def _forget(self) -> None:
        self._version: int | None = None
        self._next_read = 0.0
        self._next_drawing = 0.0
        self._refits_at: tuple[Any, ...] | None = None
        self._refits: dict[str, tuple[Refit, ...]] = {}
        self._known: dict[tuple[str, int], Refit] = {}
        self._begun_at: tuple[Any, ...] | None = None
        self._begun: dict[str, WatchSeen] = {}
        self._plan: Plan | None = None
        self._seen: Seen | None = None
        self._drawings: dict[str, tuple[str, TailDrawing]] = {}

    def __enter__(self) -> StoreWatch:
        return self

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        self.close()

    def close(self) -> None:
        """Close the file."""
        if self._reader is not None:
            self._reader.close()
            self._reader = None

    @property
    def path(self) -> Path:
        """The store's file. Raises what opening it raises."""
        return self._open().path

    def _open(self) -> Reader:
        """The reader, opened anew when the file was replaced or the last look failed."""
        if self._reader is not None and _identity(self._reader.path) != self._file:
            self.close()
        if self._reader is None:
            self._forget()
            self._reader = open_place(self._place)
            self._file = _identity(self._reader.path)
        return self._reader

    def look(self) -> Seen:
        """The state of the store; the same object while nothing was committed and while resting from a long read.

        Raises StoreError or SourceError while it cannot be read; the next look tries again.
        """
        try:
            reader = self._open()
            version = _row(reader, "pragma data_version")[0]
            started = time.monotonic()
            if self._seen is None or (version != self._version and started >= self._next_read):
                with reader.snapshot():
                    self._seen = self._read(reader)
                self._version = version
                now = time.monotonic()
                self._next_read = now + REST * (now - started)
            return self._seen
        except StoreError:
            self.close()
            raise

    def _read(self, reader: Reader) -> Seen:
        plan = self._plan_in_force(reader)
        refits = self._last_refits(reader)
        accepted = {one.stream: one.known_at for one in reader.accepted_changes()}
        baselines = _in_force(reader.baselines(), accepted)
        watches = self._watches(reader)
        alarms: dict[str, list[Alarm]] = {}
        for stood in reader.alarms(only_open=True):
            alarms.setdefault(stood.stream, []).append(decoded_alarm(stood, reader.path))
        open_events: Counter[str] = Counter()
        for pane in reader.open_panes():
            open_events[pane.stream] += pane.events
        waiting = Counter(job.stream for job in reader.refit_jobs())

        def seen(state: StreamState) -> StreamSeen:
            return StreamSeen(
                state=state,
                plan=plan.stream(state.stream, state.unit),
                refits=refits.get(state.stream, ()),
                baseline=baselines.get(state.stream),
                open_events=open_events[state.stream],
                waiting=waiting[state.stream],
                alarms=tuple(alarms.get(state.stream, ())),
                watch=watches.get(state.stream) if state.stream in baselines else None,
                accepted=state.stream in accepted and state.stream not in baselines,
            )

        return Seen(
            store=reader.path.name,
            plan=plan,
            streams=tuple(seen(state) for state in reader.streams()),
            feeds=accounts(reader.chains()),
        )

    def _plan_in_force(self, reader: Reader) -> Plan:
        if self._plan is None or self._plan.digest != reader.settings_digest():
            self._plan = plan_of(reader)
        return self._plan

    def _watches(self, reader: Reader) -> dict[str, WatchSeen]:
        """Where the watch of each stream stands; what is fixed in a watch is decoded once."""
        at = _row(reader, "select max(rowid), count(*) from watch")
        if at != self._begun_at:
            self._begun = {begun.id: begun_watch(begun, reader.path) for begun in reader.watches()}
            self._begun_at = at
        found = {}
        for stood in reader.watch_states():
            begun = self._begun.get(stood.watch)
            if begun is not None:
                found[stood.stream] = standing_watch(begun, stood, reader.path)
        return found

    def _last_refits(self, reader: Reader) -> dict[str, tuple[Refit, ...]]:
        at = _row(reader, "select max(rowid), count(*) from refit")
        if at != self._refits_at:
            found: dict[str, list[Refit]] = {}
            known = {}
            for stored in reader.refits(last=STRIP):
                key = (stored.id, stored.known_at)
                known[key] = self._known.get(key) or decoded(stored, reader.path)
                found.setdefault(stored.stream, []).append(known[key])
            self._known = known
            self._refits = {stream: tuple(refits) for stream, refits in found.items()}
            self._refits_at = at
        return self._refits

    def focus(self, name: str) -> Focused:
        """One stream with the sizes of its newest judged window. Raises SourceError when there is no such stream."""
        seen = self.look()
        stream = next((one for one in seen.streams if one.name == name), None)
        if stream is None:
            raise unknown_stream(name, [one.name for one in seen.streams])
        try:
            reader = self._open()
            with reader.snapshot():
                drawing = self._drawing(reader, seen, stream)
                samples = tuple(reader.rejected_samples(stream.state.feed)[-3:])
                past, notes = _alarm_past(reader, name), reader.notes()
        except StoreError:
            self.close()
            raise
        feed = next((one for one in seen.feeds if one.feed == stream.state.feed), None)
        return Focused(
            stream=stream, feed=feed, drawing=drawing, samples=samples, past=past,
            notes=notes_near(notes, past, stream.refits),
        )  # fmt: skip

    def _drawing(self, reader: Reader, seen: Seen, stream: StreamSeen) -> TailDrawing | None:
        judged = stream.judged
        if judged is None:
            return None
        key = f"{judged.id} {stream.baseline.id if stream.baseline else ''}"
        held = self._drawings.get(stream.name)
        started = time.monotonic()
        if held is None or (held[0] != key and started >= self._next_drawing):
            content = reader.window(stream.name, judged.start, judged.end, seen.plan.window_distinct).content
            drawing = TailDrawing(
                sizes=np.asarray(content.sizes),
                counts=np.asarray(content.counts),
                unit=stream.plan.unit,
                fit=fitted_tails(stream),
                baseline=baseline_tails(stream),
                limit=stream.plan.limit,
            )
            # One at a time: the sizes of many large windows would be held for nothing.
            self._drawings = {stream.name: (key, drawing)}
            now = time.monotonic()
            self._next_drawing = now + REST * (now - started)
        return self._drawings[stream.name][1]


def _row(reader: Reader, sql: str) -> tuple[Any, ...]:
    """One row, SQLite's errors named."""
    with named_errors(reader.path):
        row: tuple[Any, ...] = reader.db.execute(sql).fetchone()
    return row


def _in_force(baselines: list[BaselineSet], accepted: dict[str, int]) -> dict[str, BaselineSet]:
    """The last baseline of each stream, unless a change was accepted since it was known."""
    last = {baseline.stream: baseline for baseline in baselines}
    return {name: one for name, one in last.items() if one.known_at >= accepted.get(name, one.known_at)}


def _alarm_past(reader: Reader, stream: str) -> tuple[AlarmPast, ...]:
    """The last alarms of a stream, each with its history, newest first."""
    found = [stood for stood in reader.alarms() if stood.stream == stream][-PAST_ALARMS:]
    return tuple(
        AlarmPast(alarm=decoded_alarm(stood, reader.path), moves=tuple(reader.alarm_moves(stood.id)))
        for stood in reversed(found)
    )


def _identity(path: Path) -> tuple[int, int] | None:
    """Which file lies at the path: a store put in its place is another one."""
    try:
        found = os.stat(path)
    except OSError:
        return None
    return found.st_dev, found.st_ino
