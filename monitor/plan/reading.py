"""Settings text to plan: TOML, then names, types and values, each refusal with the path of its key."""

from __future__ import annotations

import tomllib
from collections.abc import Iterator
from hashlib import blake2b
from typing import Any, TypeVar

import msgspec

from monitor.alarms.known import EFFECTS, Effect, KnownChange
from monitor.errors import SettingsError
from monitor.parse.compile import compile_parser
from monitor.parse.lines import FormatError, LineFormat
from monitor.plan.alarm_rules import AlarmTable, policies
from monitor.plan.checks import (
    in_range,
    no_unknown_keys,
    passages,
    quoted,
    span,
    time_of,
    timezone_of,
)
from monitor.plan.listen import read_listen
from monitor.plan.notifying import NotifyTable, receivers
from monitor.plan.records import FeedPlan, KnownCalendar, Plan, PlannedTail, StreamPlan
from monitor.plan.spans import DAY, SECOND

Table = TypeVar("Table", bound=msgspec.Struct)
Fields = str | int | list[str | int]


class FeedTable(msgspec.Struct, frozen=True, forbid_unknown_fields=True, kw_only=True):
    """[feed.NAME] as written."""

    follow: str | list[str] | None = None
    read: str | None = None
    listen: str | None = None
    listen_beyond_loopback: bool = False
    lines: str
    size: str | int | None = None
    time: str | int | None = None
    time_unit: str = "auto"
    stream: Fields | None = None
    unit: str = "units"
    where: dict[str, str | int | float | bool | list[str | int | float | bool]] = {}
    scale: float = 1.0
    pattern: str | None = None
    delimiter: str = ","
    header: bool | None = None
    timezone: str | None = None


class WatchTable(msgspec.Struct, frozen=True, forbid_unknown_fields=True, kw_only=True):
    """[watch] as written, with its defaults."""

    counting: str = "measured"
    pane: str = "1h"
    slot: str = "1m"
    window: str = "14d"
    lateness: str = "2m"
    idle: str = "10m"
    ahead: str = "7d"
    replicates: int = 2500
    rule_out: float = 0.1
    min_tail: int = 10
    baseline_tail: int = 500
    differs_at: float = 0.01
    false_alarm_every: str = "90d"
    limit: float | None = None
    limit_at_most: str | None = None
    one_in: int | list[int] = 10_000
    timezone: str = "UTC"
    distinct: int = 4096
    window_distinct: int = 200_000
    seed: int = 1
    keep_panes: str | None = None
    keep_refits: str | None = None
    max_streams: int = 10_000


class PlannedTable(msgspec.Struct, frozen=True, forbid_unknown_fields=True, kw_only=True):
    """[stream.NAME.plan] as written."""

    alpha: float
    xmin: float


class StreamTable(msgspec.Struct, frozen=True, forbid_unknown_fields=True, kw_only=True):
    """[stream.NAME] as written: only what differs from [watch]."""

    counting: str | None = None
    window: str | None = None
    replicates: int | None = None
    rule_out: float | None = None
    min_tail: int | None = None
    baseline_tail: int | None = None
    differs_at: float | None = None
    false_alarm_every: str | None = None
    limit: float | None = None
    limit_at_most: str | None = None
    one_in: int | list[int] | None = None
    unit: str | None = None
    plan: PlannedTable | None = None


class KnownTable(
    msgspec.Struct, frozen=True, forbid_unknown_fields=True, kw_only=True, rename={"start": "from", "end": "to"}
):
    """[[known]] as written: one change, or a calendar file of many."""

    start: Any = None  # a TOML date, date-time or text
    end: Any = None
    reason: str | None = None
    calendar: str | None = None
    streams: str = "*"
    effect: str = "hold notices"


class SettingsTable(msgspec.Struct, frozen=True, forbid_unknown_fields=True, kw_only=True):
    """The whole file as written."""

    store: str
    feed: dict[str, FeedTable]
    watch: WatchTable = WatchTable()
    stream: dict[str, StreamTable] = {}
    known: list[KnownTable] = []
    notify: dict[str, NotifyTable] = {}
    alarm: dict[str, AlarmTable] = {}


TABLES_BY_NAME: tuple[tuple[str, type[msgspec.Struct]], ...] = (
    ("feed", FeedTable), ("stream", StreamTable), ("notify", NotifyTable), ("alarm", AlarmTable),
)  # fmt: skip


def read_plan(text: str, name: str) -> Plan:
    """The plan that a settings text says.

    Parameters: text, TOML; name, what messages call the file.
    Raises SettingsError: the path of the key, what was expected, and the nearest known key.
    """
    try:
        raw = tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        raise SettingsError(f"{name}: not valid TOML: {error}.") from None
    no_unknown_keys(name, raw, SettingsTable)
    for section, kind in TABLES_BY_NAME:
        tables = raw.get(section)
        for key, value in tables.items() if isinstance(tables, dict) else ():
            # One by one, since in a whole dict the offending table's name would not be told.
            _typed(name, f"{section}.{quoted(key)}", value, kind)
    return _plan(name, _typed(name, "", raw, SettingsTable), text)


def _typed(name: str, path: str, raw: Any, kind: type[Table]) -> Table:
    """The table as a record. Raises SettingsError with the key first: 'watch.replicates: expected `int` ...'."""
    try:
        return msgspec.convert(raw, kind)
    except msgspec.ValidationError as error:
        what, _, where = str(error).partition(" - at `$")
        full = (path + where.rstrip("`")).lstrip(".") or "settings"
        raise SettingsError(f"{name}: {full}: {what[0].lower()}{what[1:]}.") from None


def _plan(name: str, table: SettingsTable, text: str) -> Plan:
    watch = table.watch
    zone = timezone_of(name, "watch.timezone", watch.timezone)
    if not table.store.strip():
        raise SettingsError(f'{name}: store: expected the path of the store file, such as "orders.db".')
    pane, slot = _pane_and_slot(name, watch)
    in_range(name, "watch.distinct", watch.distinct, low=16, high=1_000_000)
    in_range(name, "watch.window_distinct", watch.window_distinct, low=watch.distinct, high=10_000_000)
    in_range(name, "watch.seed", watch.seed, low=0, high=2**53 - 1)
    in_range(name, "watch.max_streams", watch.max_streams, low=1, high=1_000_000)
    everywhere = _everywhere(name, watch, pane)
    overrides = sorted(
        ((pattern, _changes(name, pattern, given, pane)) for pattern, given in table.stream.items()),
        key=lambda item: (len(item[0]), item[0]),
    )
    return Plan(
        store=table.store,
        feeds=_feeds(name, table),
        pane=pane,
        slot=slot,
        lateness=span(name, "watch.lateness", watch.lateness, low=0),
        idle=span(name, "watch.idle", watch.idle, low=SECOND),
        ahead=span(name, "watch.ahead", watch.ahead, low=SECOND),
        distinct=watch.distinct,
        window_distinct=watch.window_distinct,
        seed=watch.seed,
        timezone=zone,
        everywhere=everywhere,
        overrides=tuple(overrides),
        keep_panes=_kept(name, "watch.keep_panes", watch.keep_panes),
        keep_refits=_kept(name, "watch.keep_refits", watch.keep_refits),
        max_streams=watch.max_streams,
        known=_known(name, table.known, zone),
        calendars=_calendars(name, table.known),
        receivers=receivers(name, table.notify, zone),
        policies=policies(name, table.alarm),
        text=text,
        digest=blake2b(text.encode(), digest_size=16).hexdigest(),
    )


def _kept(name: str, path: str, text: str | None) -> int | None:
    """How long something is kept; None: for good."""
    return None if text is None else span(name, path, text, low=DAY)


def _pane_and_slot(name: str, watch: WatchTable) -> tuple[int, int]:
    pane = span(name, "watch.pane", watch.pane, low=SECOND)
    if DAY % pane:
        raise SettingsError(f'{name}: watch.pane: "{watch.pane}" does not divide a day. Use 10m, 1h, 6h or 1d.')
    slot = span(name, "watch.slot", watch.slot, low=SECOND)
    if pane % slot:
        raise SettingsError(
            f'{name}: watch.slot: "{watch.slot}" does not divide the pane "{watch.pane}". Use such as 1m of 1h.'
        )
    return pane, slot


def _everywhere(name: str, watch: WatchTable, pane: int) -> StreamPlan:
    given = {
        field: getattr(watch, field)
        for field in ("counting", "window", "replicates", "rule_out", "min_tail", "baseline_tail", "differs_at",
                      "false_alarm_every", "one_in", "limit", "limit_at_most")
    }  # fmt: skip
    defaults: dict[str, Any] = {"unit": "units", "planned": None, "limit": None, "limit_at_most": None}
    return StreamPlan(**{**defaults, **_judged_by(name, "watch", given, pane)})


def _changes(name: str, pattern: str, given: StreamTable, pane: int) -> dict[str, object]:
    path = f'stream."{pattern}"'
    values = {key: getattr(given, key) for key in given.__struct_fields__ if key != "plan"}
    changes = _judged_by(name, path, values, pane)
    if given.plan is not None:
        in_range(name, f"{path}.plan.alpha", given.plan.alpha, low=1.0, high=100.0, open_low=True)
        in_range(name, f"{path}.plan.xmin", given.plan.xmin, low=0.0, open_low=True)
        changes["planned"] = PlannedTail(alpha=given.plan.alpha, xmin=given.plan.xmin)
    return changes


def _judged_by(name: str, path: str, given: dict[str, Any], pane: int) -> dict[str, object]:
    """Check the keys of [watch] or [stream.X] that say how a stream is judged; keys without a value are left out."""
    given = {key: value for key, value in given.items() if value is not None}
    out: dict[str, object] = dict(given)
    if "counting" in given and given["counting"] not in ("measured", "whole"):
        raise SettingsError(
            f'{name}: {path}.counting: "{given["counting"]}" is neither "measured" (continuous law) nor "whole" '
            "(discrete law)."
        )
    if "window" in given:
        out["window"] = window = span(name, f"{path}.window", given["window"], low=pane)
        if window % pane:
            raise SettingsError(f'{name}: {path}.window: "{given["window"]}" is not a whole number of panes.')
    ranges: dict[str, tuple[float, float]] = {
        "replicates": (0, 1_000_000), "min_tail": (2, 1_000_000), "baseline_tail": (10, 100_000_000),
    }  # fmt: skip
    for key, (low, high) in ranges.items():
        if key in given:
            in_range(name, f"{path}.{key}", given[key], low=low, high=high)
    for key in ("rule_out", "differs_at"):
        if key in given:
            in_range(name, f"{path}.{key}", given[key], low=0.0, high=0.5, open_low=True)
    if "limit" in given:
        in_range(name, f"{path}.limit", given["limit"], low=0.0, open_low=True)
    if "false_alarm_every" in given:
        out["false_alarm_every"] = span(name, f"{path}.false_alarm_every", given["false_alarm_every"], low=DAY)
    if "limit_at_most" in given:
        out["limit_at_most"] = passages(name, f"{path}.limit_at_most", given["limit_at_most"])
    if "one_in" in given:
        wanted = given["one_in"] if isinstance(given["one_in"], list) else [given["one_in"]]
        for one_in in wanted:
            in_range(name, f"{path}.one_in", one_in, low=2, high=10**15)
        if not wanted:
            raise SettingsError(f"{name}: {path}.one_in: expected a number of events, such as 10000.")
        out["one_in"] = tuple(sorted(set(wanted)))
    return out


def _feeds(name: str, table: SettingsTable) -> tuple[FeedPlan, ...]:
    if not table.feed:
        raise SettingsError(f"{name}: feed: expected at least one [feed.NAME] table that says where lines come from.")
    feeds = tuple(_feed(name, key, given, table.watch.timezone) for key, given in table.feed.items())
    if sum(feed.read is not None for feed in feeds) > 1:
        raise SettingsError(f"{name}: feed: only one feed can read standard input.")
    return feeds


def _feed(name: str, key: str, given: FeedTable, timezone: str) -> FeedPlan:
    path = f"feed.{key}"
    follow = (given.follow,) if isinstance(given.follow, str) else tuple(given.follow or ())
    ways = [way for way, there in (("follow", follow), ("read", given.read), ("listen", given.listen)) if there]
    if len(ways) != 1:
        raise SettingsError(
            f'{name}: {path}: expected exactly one of follow = ["logs/*.jsonl"], read = "-" or '
            f'listen = "http://127.0.0.1:7070", found {" and ".join(ways) or "none"}.'
        )
    listen = None
    if given.listen is not None:
        listen = read_listen(name, f"{path}.listen", given.listen, beyond_loopback=given.listen_beyond_loopback)
    if given.read not in (None, "-"):
        raise SettingsError(f'{name}: {path}.read: only "-" (standard input) can be read; files are followed.')
    zone = timezone_of(name, f"{path}.timezone", given.timezone or timezone)
    stream = () if given.stream is None else given.stream
    fields = tuple(stream) if isinstance(stream, list | tuple) else (stream,)
    where = tuple(
        (field, tuple(_as_text(v) for v in (value if isinstance(value, list) else [value])))
        for field, value in given.where.items()
    )
    in_range(name, f"{path}.scale", given.scale, low=0.0, open_low=True)
    given_format = {
        "lines": given.lines, "size": given.size, "time": given.time, "time_unit": given.time_unit, "stream": fields,
        "where": where, "scale": given.scale, "pattern": given.pattern, "delimiter": given.delimiter,
        "header": given.header, "timezone": zone,
    }  # fmt: skip
    line_format = _typed(name, path, given_format, LineFormat)
    try:
        compile_parser(line_format)
    except FormatError as error:
        raise SettingsError(f"{name}: {path}.{error}") from None
    return FeedPlan(
        name=key,
        follow=follow,
        read=given.read,
        format=line_format,
        unit=given.unit,
        by_field=bool(fields),
        listen=listen,
    )


def _as_text(value: str | float | bool) -> str:
    """A condition's value as it stands in a line."""
    if isinstance(value, bool):
        return "true" if value else "false"
    return str(value)


def _known(name: str, tables: list[KnownTable], zone: str) -> tuple[KnownChange, ...]:
    known = []
    for path, given, effect in _with_effects(name, tables):
        if given.calendar is not None:
            continue
        for key, value in (("from", given.start), ("to", given.end), ("reason", given.reason)):
            if value is None:
                raise SettingsError(f"{name}: {path}.{key}: is missing; or name a calendar file instead.")
        start = time_of(name, f"{path}.from", given.start, zone)
        end = time_of(name, f"{path}.to", given.end, zone)
        if end <= start:
            raise SettingsError(f"{name}: {path}.to: is not after from.")
        known.append(KnownChange(start=start, end=end, streams=given.streams, reason=given.reason or "", effect=effect))
    return tuple(known)


def _calendars(name: str, tables: list[KnownTable]) -> tuple[KnownCalendar, ...]:
    """The calendar files to read known changes from; their events bring times and reasons of their own."""
    calendars = []
    for path, given, effect in _with_effects(name, tables):
        if given.calendar is None:
            continue
        for key, value in (("from", given.start), ("to", given.end), ("reason", given.reason)):
            if value is not None:
                raise SettingsError(f"{name}: {path}.{key}: comes from the calendar's events; leave it out.")
        if not given.calendar.strip():
            raise SettingsError(f'{name}: {path}.calendar: expected the path of a file such as "closures.ics".')
        calendars.append(KnownCalendar(path=given.calendar, streams=given.streams, effect=effect))
    return tuple(calendars)


def _with_effects(name: str, tables: list[KnownTable]) -> Iterator[tuple[str, KnownTable, Effect]]:
    for index, given in enumerate(tables):
        effect = next((effect for effect in EFFECTS if effect == given.effect), None)
        if effect is None:
            raise SettingsError(f'{name}: known[{index}].effect: "{given.effect}" is none of {", ".join(EFFECTS)}.')
        yield f"known[{index}]", given, effect
