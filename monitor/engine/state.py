"""What the engine remembers between two stimuli. Rebuilt at start from the store; never a second truth."""

from __future__ import annotations

from collections import Counter, deque
from dataclasses import dataclass, field

import msgspec

from monitor.alarms.alarm import Alarm
from monitor.alarms.known import KnownChange
from monitor.plan import Plan
from monitor.watch.rules import RuleName, Watch, WatchState
from storage.facts import BaselineSet, ChainState, RefitJob, RejectedSample, StreamState
from storage.gathering import PaneBuilder

FeedSet = frozenset[str]


class WaitingEvent(msgspec.Struct, frozen=True, kw_only=True):
    """An event whose stamp lies far ahead; counted once the chain's next line confirms it."""

    size: float
    stamp: int
    stream: str
    digest: str
    place: str


@dataclass(slots=True)
class Chain:
    """One followed path through its rotations."""

    feed: str
    name: str
    bookmark: str = ""
    running_max: int | None = None
    edge: int | None = None
    idle: bool = False
    waiting: WaitingEvent | None = None
    lines: int = 0
    events: int = 0
    late: int = 0
    skipped: Counter[str] = field(default_factory=Counter)
    rejected: Counter[str] = field(default_factory=Counter)
    at_end: bool = False
    quiet_since: int | None = None
    """When something was last written to it; None until it was seen in this run."""
    dated: bool = False
    """Its place can tell when it was last written; else the last arrival counts."""
    ended: bool = False
    changed: bool = True

    def floor(self, lateness: int) -> int | None:
        """The earliest effective time its next line can get; None while nothing is known."""
        own = None if self.running_max is None else self.running_max - lateness
        known = [bound for bound in (own, self.edge) if bound is not None]
        return max(known) if known else None

    def fact(self) -> ChainState:
        """The chain as it goes into the store."""
        return ChainState(
            feed=self.feed, chain=self.name, bookmark=self.bookmark, running_max=self.running_max, edge=self.edge,
            idle=self.idle, waiting=msgspec.json.encode(self.waiting).decode() if self.waiting else None,
            lines=self.lines, events=self.events, late=self.late, skipped=dict(self.skipped),
            rejected=dict(self.rejected),
        )  # fmt: skip


@dataclass(slots=True)
class Stream:
    """One named sequence of events: its totals and its open panes."""

    name: str
    feed: str
    unit: str
    first: int
    newest: int
    events: int = 0
    late: int = 0
    builders: dict[int, PaneBuilder] = field(default_factory=dict)
    """Pane start -> what gathers its events; kept while the pane is open."""
    open: set[int] = field(default_factory=set)
    """Starts of panes that are not sealed, committed or not."""
    changed: bool = True

    def builder(self, start: int) -> PaneBuilder:
        """What gathers the events of the pane that starts then; the stream has changed."""
        self.changed = True
        found = self.builders.get(start)
        if found is None:
            found = self.builders[start] = PaneBuilder()
            self.open.add(start)
        return found

    def fact(self) -> StreamState:
        """The stream as it goes into the store."""
        return StreamState(
            stream=self.name, feed=self.feed, unit=self.unit, first=self.first, newest=self.newest,
            events=self.events, late=self.late,
        )  # fmt: skip


class Posted(msgspec.Struct, frozen=True, kw_only=True):
    """A watch in force, where it stands, and the rules whose alarm stands."""

    id: str
    watch: Watch
    state: WatchState
    holding: tuple[RuleName, ...] = ()


@dataclass(slots=True)
class State:
    """Everything the engine knows. `step` changes it in place; only its caller holds it."""

    plan: Plan
    distinct: int
    chains: dict[tuple[str, str], Chain] = field(default_factory=dict)
    streams: dict[str, Stream] = field(default_factory=dict)
    marks: dict[FeedSet, int] = field(default_factory=dict)
    """Watermark of each set of feeds: everything before it is sealed or will be at the next commit."""
    baselines: dict[str, BaselineSet] = field(default_factory=dict)
    watches: dict[str, Posted] = field(default_factory=dict)
    alarms: dict[tuple[str, str], Alarm] = field(default_factory=dict)
    """(stream, rule) -> its open alarm."""
    declared: list[KnownChange] = field(default_factory=list)
    """Known changes that people declared beside the settings."""
    since: dict[str, int] = field(default_factory=dict)
    """Stream -> the moment before which nothing counts for its baseline: a change was accepted then."""
    jobs: deque[RefitJob] = field(default_factory=deque)
    """Committed jobs, in window order; the one being judged is first until its outcome is stored."""
    samples: list[RejectedSample] = field(default_factory=list)
    by_arrival: frozenset[str] = frozenset()
    """Feeds whose lines carry no time."""
    fixed: dict[str, str] = field(default_factory=dict)
    """Stream name -> feed, for feeds that are one stream."""
    wide: FeedSet = frozenset()
    """Feeds whose lines name their stream: they may carry any."""
    forgotten: dict[str, int] = field(default_factory=dict)
    """Stream -> the day (ns) up to which old panes and refits were last asked to be deleted."""
    uncommitted: int = 0
    """Events taken in since the last commit."""

    @classmethod
    def fresh(cls, plan: Plan, distinct: int) -> State:
        """The state of an empty store."""
        return cls(
            plan=plan,
            distinct=distinct,
            by_arrival=frozenset(feed.name for feed in plan.feeds if feed.format.time is None),
            fixed={feed.name: feed.name for feed in plan.feeds if not feed.by_field},
            wide=frozenset(feed.name for feed in plan.feeds if feed.by_field),
        )

    def carriers(self, stream: str) -> FeedSet:
        """The feeds that may carry a stream, by the settings alone."""
        own = self.fixed.get(stream)
        return self.wide | {own} if own is not None else self.wide
