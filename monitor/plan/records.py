"""The plan: what the settings say, checked and resolved. Spans and times are ns."""

from __future__ import annotations

from fnmatch import fnmatchcase
from typing import Literal

import msgspec

from monitor.alarms.known import Effect, KnownChange
from monitor.alarms.priorities import Policy, Rule
from monitor.parse.lines import LineFormat
from monitor.plan.listen import Listen
from monitor.plan.receivers import Receiver

Counting = Literal["measured", "whole"]


class PlannedTail(msgspec.Struct, frozen=True, kw_only=True):
    """The tail that was planned on: compared with from the first window on."""

    alpha: float
    xmin: float


class Passages(msgspec.Struct, frozen=True, kw_only=True):
    """So many passages of the limit in a period, such as '1 per 30d'."""

    times: float
    period: int


class FeedPlan(msgspec.Struct, frozen=True, kw_only=True):
    """One place that lines come from.

    follow   patterns of files to follow, relative to the settings file; empty when `read` or `listen` is set
    read     '-' for standard input, or None
    listen   address to listen on, or None
    by_field True when a field of the line names the stream; otherwise every line belongs to `name`
    """

    name: str
    follow: tuple[str, ...]
    read: str | None
    format: LineFormat
    unit: str
    by_field: bool
    listen: Listen | None = None


class StreamPlan(msgspec.Struct, frozen=True, kw_only=True):
    """How one stream is judged."""

    counting: Counting
    window: int
    replicates: int
    rule_out: float
    min_tail: int
    baseline_tail: int
    differs_at: float
    false_alarm_every: int
    one_in: tuple[int, ...]
    limit: float | None
    limit_at_most: Passages | None
    unit: str
    planned: PlannedTail | None


class KnownCalendar(msgspec.Struct, frozen=True, kw_only=True):
    """An iCalendar file that announces changes: its path, relative to the settings file, and whom they concern."""

    path: str
    streams: str
    effect: Effect


class Plan(msgspec.Struct, frozen=True, kw_only=True):
    """Everything the settings decide."""

    store: str
    feeds: tuple[FeedPlan, ...]
    pane: int
    slot: int
    lateness: int
    idle: int
    ahead: int
    distinct: int
    window_distinct: int
    seed: int
    timezone: str
    everywhere: StreamPlan
    overrides: tuple[tuple[str, dict[str, object]], ...]
    """(pattern, changed fields of StreamPlan), longest pattern last, so that the longest match wins."""
    keep_panes: int | None
    keep_refits: int | None
    """How long panes and refits are kept, by their end; None: for good."""
    max_streams: int
    """Lines that would open one more stream are rejected."""
    known: tuple[KnownChange, ...]
    calendars: tuple[KnownCalendar, ...]
    receivers: tuple[Receiver, ...]
    policies: dict[Rule, Policy]
    """How the alarms of each rule are treated."""
    text: str
    digest: str

    def stream(self, name: str, feed_unit: str) -> StreamPlan:
        """How the stream of this name is judged; its unit is its feed's unless overridden."""
        chosen = msgspec.structs.replace(self.everywhere, unit=feed_unit)
        for pattern, changes in self.overrides:
            if fnmatchcase(name, pattern):
                chosen = msgspec.structs.replace(chosen, **changes)
        return chosen
