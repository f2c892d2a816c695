"""The whole inference: sample in, proposal out."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Literal, cast

from monitor.errors import DataError
from monitor.parse.lines import Field, LineFormat
from monitor.propose import cautions
from monitor.propose.columns import Column, Table
from monitor.propose.conditions import Condition, find_condition, selected
from monitor.propose.formats import combined_table, csv_table, json_table, number_table, pairs_table
from monitor.propose.names import called, feed_name
from monitor.propose.records import NotTheSize, Proposal, SizeCandidate, StreamField, TimeFound, Watchable
from monitor.propose.samples import FileSample, Line, lines_of
from monitor.propose.settings_text import Written, settings_text
from monitor.propose.sizes import rank_sizes
from monitor.propose.streams import BASELINE_TAIL, TAIL_SHARE, find_streams, watchable
from monitor.propose.templates import pattern_table
from monitor.propose.times import find_times
from monitor.propose.trial import Trial, try_format
from monitor.propose.units import Duration, UnitFound, find_duration, find_unit
from monitor.render.safe import plain

_READERS: tuple[Callable[[Sequence[Line]], Table | None], ...] = (
    json_table,
    combined_table,
    number_table,
    pairs_table,
    csv_table,
)
_STREAMS_SHOWN = 20


@dataclass(frozen=True, slots=True)
class Found:
    """What the columns say, before it is tried."""

    table: Table
    size: Column
    sizes: tuple[SizeCandidate, ...]
    not_sizes: tuple[NotTheSize, ...]
    times: tuple[TimeFound, ...]
    streams: tuple[StreamField, ...]
    duration: Duration | None
    unit: UnitFound
    condition: Condition | None

    @property
    def time(self) -> TimeFound | None:
        """The event time that was taken."""
        return self.times[0] if self.times else None

    @property
    def stream(self) -> StreamField | None:
        """The field of the streams that was taken; a doubtful one is only told."""
        return self.streams[0] if self.streams and self.streams[0].score > 0 else None


def propose(files: tuple[FileSample, ...], follow: tuple[str, ...]) -> Proposal:
    """Propose settings for the log of which `files` is a sample; follow: patterns for its files, () for a pipe.

    Raises DataError when nothing in the lines can be a size, saying what was seen.
    """
    names = ", ".join(plain(file.name) for file in files[:3]) + (", ..." if len(files) > 3 else "")
    lines = lines_of(files)
    if not lines:
        raise DataError(f"{names}: no readable line. Give a log that has at least a few lines of text in UTF-8.")
    found = _found(_table(lines, names), names)
    if found.table.pattern is not None:
        found = _found(_with_roles(found), names)
    format_ = _format(found)
    trial = try_format(format_, files)
    return _proposal(files, follow, found, format_, trial)


def _table(lines: list[Line], names: str) -> Table:
    for read in _READERS:
        table = read(lines)
        if table is not None:
            return table
    spaced = csv_table(lines, " ")
    if spaced is not None and _is_whole(spaced):
        return spaced
    pattern = pattern_table(lines)
    if pattern is not None:
        return pattern
    if lines[0].text.lstrip()[:1] in ("[", "{"):
        raise DataError(
            f"{names}: looks like one JSON document over many lines. Lines are read one by one: write one object "
            "a line."
        )
    raise DataError(
        f"{names}: the lines follow no form with a number in it. The first one begins: {plain(lines[0].text[:120])}"
    )


def _is_whole(table: Table) -> bool:
    """Columns between spaces hold a size, and no time that a space cuts in two."""
    times = find_times(table)
    return bool(rank_sizes(table, _fields(times))[0] and times) and not times[0].kind.startswith("dates")


def _with_roles(found: Found) -> Table:
    """The table of a pattern whose chosen groups are called size, time and stream."""
    roles: dict[Field | None, Field] = {found.size.field: "size"}
    if found.time is not None:
        roles[found.time.field] = "time"
    if found.stream is not None:
        roles[found.stream.field] = "stream"
    old = found.table
    columns = [
        Column(roles.get(c.field, c.field or ""), c.label, c.texts, quoted=False, pieces=old.pieces)
        for c in old.columns
    ]
    table = Table(old.lines, columns, old.pieces, old.total)
    table.pattern, table.evidence = old.pattern, old.evidence
    for group, role in roles.items():
        table.pattern = (table.pattern or "").replace(f"(?P<{group}>", f"(?P<{role}>")
    return table


def _fields(times: tuple[TimeFound, ...]) -> frozenset[object]:
    return frozenset(t.field for t in times)


def _found(table: Table, names: str) -> Found:
    times = find_times(table)
    sizes, not_sizes = rank_sizes(table, _fields(times))
    if not sizes:
        told = "; ".join(f"{plain(called(n.field))}: {n.why}" for n in not_sizes[:8]) or "no field holds numbers"
        raise DataError(f"{names}: {table.evidence}, but no field can be a size ({told}).")
    size = next(c for c in table.columns if c.field == sizes[0].field)
    condition = find_condition(table, size)
    if condition is not None:
        table = selected(table, condition.rows)
        times = find_times(table)
        size = next(c for c in table.columns if c.field == size.field)
    duration = find_duration(size, table, times)
    return Found(
        table=table, size=size, sizes=sizes, not_sizes=not_sizes, times=times,
        streams=find_streams(table, {size.field, *(t.field for t in times)}), duration=duration,
        unit=find_unit(size, table, duration), condition=condition,
    )  # fmt: skip


def _format(found: Found) -> LineFormat:
    table, time, stream = found.table, found.time, found.stream
    where: tuple[tuple[Field, tuple[str, ...]], ...] = ()
    if found.condition is not None:
        where = ((found.condition.field, found.condition.values),)
    unit = cast(Literal["auto", "s", "ms", "us", "ns"], time.unit if time is not None else "auto")
    return LineFormat(
        lines=cast(Literal["json", "csv", "combined", "pairs", "number", "pattern"], table.lines),
        size=found.size.field, time=None if time is None else time.field,
        stream=() if stream is None else (stream.field,), where=where, pattern=table.pattern,
        delimiter=table.delimiter, header=table.header, time_unit=unit,
    )  # fmt: skip


def _proposal(
    files: tuple[FileSample, ...], follow: tuple[str, ...], found: Found, format_: LineFormat, trial: Trial
) -> Proposal:
    feed = feed_name(files[0].name)
    pane, window = _pane_and_window(trial)
    streams = _watchables(trial, window, feed)
    written = Written(
        feed=feed, follow=follow, format=format_, unit=found.unit.unit, pane=pane, window=window,
        lateness=cautions.lateness_for(found.time),
    )  # fmt: skip
    told = Proposal(
        feed=feed, follow=follow, format=format_, unit=found.unit.unit, sampled_lines=trial.lines,
        sampled_bytes=sum(len(p.data) for f in files for p in f.pieces), format_evidence=found.table.evidence,
        sizes=found.sizes, not_sizes=found.not_sizes, times=found.times, stream_fields=found.streams,
        streams=streams, rejected=dict(trial.rejected), skipped=dict(trial.skipped), samples=tuple(trial.samples),
        doubts=tuple(_doubts(found, trial)), pane=pane, window=window, lateness=written.lateness, settings="",
        next_commands=_next(follow),
    )  # fmt: skip
    text = settings_text(written, told, unit_evidence=found.unit.evidence, condition=found.condition)
    return _with_text(told, text)


def _with_text(proposal: Proposal, text: str) -> Proposal:
    values = {name: getattr(proposal, name) for name in Proposal.__struct_fields__}
    return Proposal(**{**values, "settings": text})


def _doubts(found: Found, trial: Trial) -> list[str]:
    table, size = found.table, found.size
    doubts = [*trial.troubles, *table.notes, *cautions.size_doubts(table, size, found.sizes)]
    doubts += cautions.no_log(table, size, found.times)
    doubts += cautions.repeated_ids(table, size)
    doubts += [] if found.unit.doubt is None else [found.unit.doubt]
    doubts += cautions.time_doubts(table, size, found.times, found.duration)
    doubts += cautions.stream_doubts(found.streams)
    judged = trial.lines - sum(trial.skipped.values())
    lost = sum(trial.rejected.values())
    if judged and lost > 0.02 * judged:
        doubts.append(f"{lost} of {judged} sampled lines would be rejected; see the samples below")
    return [plain(doubt) for doubt in doubts]


def _window_days(window: str) -> float:
    return float(window[:-1])


def _pane_and_window(trial: Trial) -> tuple[str, str]:
    """A pane with some hundred events of the usual stream, and a window that holds a baseline."""
    if trial.per_day is None or not trial.events:
        return "1h", "14d"
    rates = [trial.per_day * n / trial.events for n in trial.by_stream.values() if n >= 0.01 * trial.events]
    usual = sorted(rates)[len(rates) // 2]
    pane = next((name for name, days in (("1h", 1 / 24), ("6h", 0.25)) if usual * days >= 100), "1d")
    needed = 2 * BASELINE_TAIL / TAIL_SHARE / usual
    return pane, next((f"{days}d" for days in (14, 28, 90) if days >= needed), "365d")


def _watchables(trial: Trial, window: str, feed: str) -> tuple[Watchable, ...]:
    return tuple(
        watchable(
            name or feed, count / trial.events,
            None if trial.per_day is None else trial.per_day * count / trial.events, _window_days(window),
        )
        for name, count in trial.by_stream.most_common(_STREAMS_SHOWN)
    )  # fmt: skip


def _next(follow: tuple[str, ...]) -> tuple[str, ...]:
    check = "tailgauge settings tailgauge.toml"
    if not follow:
        return check, "... | tailgauge run tailgauge.toml", "tailgauge screen"
    return check, "tailgauge run tailgauge.toml", "tailgauge screen"
