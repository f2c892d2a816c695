"""The store's records, decoded and put side by side: all that a frame or a table is made from."""

from __future__ import annotations

from collections.abc import Iterable

import msgspec

from monitor.alarms.alarm import Alarm
from monitor.plan import Plan, StreamPlan
from monitor.tail.compare import Comparison
from monitor.tail.judgement import Judgement, Level
from monitor.watch.dependence import Ground
from monitor.watch.flags import Flag
from monitor.watch.rules import Reading, Watch
from storage.facts import BaselineSet, ChainState, RefitState, RefitStored, StreamState


class Refit(msgspec.Struct, frozen=True, kw_only=True):
    """One stored refit, decoded. judgement is None when the refit failed or was skipped."""

    id: str
    stream: str
    start: int
    end: int
    state: RefitState
    reason: str | None
    panes: int
    judgement: Judgement | None
    against: Comparison | None
    flags: tuple[Flag, ...]
    versions: str

    @property
    def exponent_flag(self) -> Flag | None:
        """The finding that the tail is heavier or lighter, if there is one."""
        return next((flag for flag in self.flags if flag.rule == "exponent"), None)

    @property
    def doubtful(self) -> bool:
        """Whether p lies too near the mark to settle if a power law fits."""
        return self.judgement is not None and self.judgement.gof is not None and self.judgement.gof.doubtful

    @property
    def fit_flag(self) -> Flag | None:
        """The finding that a power law is ruled out, if there is one."""
        return next((flag for flag in self.flags if flag.rule == "fit"), None)


class WatchSeen(msgspec.Struct, frozen=True, kw_only=True):
    """The watch of a stream: its rules and promise, and what each rule read in the last slot, which ended at `at`."""

    watch: Watch
    ground: Ground | None
    """What the promise was measured on; None where there was no past to measure on."""
    since: int
    at: int
    readings: tuple[Reading, ...]

    @property
    def promised_days(self) -> float:
        """Mean days between false alarms of this stream that are promised, at the least."""
        return self.watch.budget_days if self.ground is None else self.ground.promised_days

    @property
    def nearest(self) -> Reading | None:
        """The reading of the rule that is nearest to speaking; None when no rule has gathered anything."""
        gathered = [one for one in self.readings if one.ln_statistic is not None]
        return max(gathered, key=lambda one: one.way, default=None)


class StreamSeen(msgspec.Struct, frozen=True, kw_only=True):
    """Everything a frame tells of one stream. `refits` are the last ones, newest last; `alarms` are the open ones."""

    state: StreamState
    plan: StreamPlan
    refits: tuple[Refit, ...]
    baseline: BaselineSet | None
    open_events: int
    waiting: int
    """Windows that are sealed and still to be judged."""
    alarms: tuple[Alarm, ...] = ()
    watch: WatchSeen | None = None
    accepted: bool = False
    """A change was accepted, and the baseline from it on is still to come."""

    @property
    def name(self) -> str:
        """The stream's name as it came, not made safe."""
        return self.state.stream

    @property
    def latest(self) -> Refit | None:
        """The newest refit, whatever came of it."""
        return self.refits[-1] if self.refits else None

    @property
    def judged(self) -> Refit | None:
        """The newest refit that gave a judgement."""
        return next((refit for refit in reversed(self.refits) if refit.judgement is not None), None)

    @property
    def judgement(self) -> Judgement | None:
        """The newest judgement."""
        return None if self.judged is None else self.judged.judgement

    @property
    def level(self) -> Level | None:
        """The first level asked for, from the newest judgement."""
        levels = () if self.judgement is None else self.judgement.levels
        return levels[0] if levels else None


class FeedAccount(msgspec.Struct, frozen=True, kw_only=True):
    """What became of the lines of one feed, all its chains together."""

    feed: str
    chains: int
    idle: int
    lines: int
    events: int
    late: int
    skipped: dict[str, int]
    rejected: dict[str, int]

    @property
    def rejected_lines(self) -> int:
        """Lines that could not be used."""
        return sum(self.rejected.values())


class Seen(msgspec.Struct, frozen=True, kw_only=True):
    """One consistent state of a store."""

    store: str
    plan: Plan
    streams: tuple[StreamSeen, ...]
    feeds: tuple[FeedAccount, ...]


def decode_refit(stored: RefitStored) -> Refit:
    """The refit with its JSON texts turned into records.

    Raises msgspec.DecodeError when a text is not what a refit stores.
    """
    judgement = msgspec.json.decode(stored.judgement or "null", type=Judgement | None, strict=False)
    if stored.state != "done":
        judgement = None
    return Refit(
        id=stored.id,
        stream=stored.stream,
        start=stored.start,
        end=stored.end,
        state=stored.state,
        reason=stored.reason,
        panes=stored.panes,
        judgement=judgement,
        against=msgspec.json.decode(stored.comparison or "null", type=Comparison | None, strict=False),
        flags=msgspec.json.decode(stored.flags or "[]", type=tuple[Flag, ...], strict=False),
        versions=stored.versions,
    )


def baseline_of(refit: Refit, baselines: Iterable[BaselineSet]) -> BaselineSet | None:
    """The baseline that the refit was compared with.

    The last one in force before the window's end; among those, one whose xmin is the comparison's, since a
    live baseline comes into force only at the first slot without events.
    """
    able = [b for b in baselines if b.stream == refit.stream and b.effective_from < refit.end and b.refit != refit.id]
    if refit.against is not None:
        able = [b for b in able if b.xmin == refit.against.xmin] or able
    return able[-1] if able else None


def accounts(chains: Iterable[ChainState]) -> tuple[FeedAccount, ...]:
    """The accounts of chains, summed by feed."""
    by_feed: dict[str, list[ChainState]] = {}
    for chain in chains:
        by_feed.setdefault(chain.feed, []).append(chain)
    return tuple(
        FeedAccount(
            feed=feed,
            chains=len(found),
            idle=sum(chain.idle for chain in found),
            lines=sum(chain.lines for chain in found),
            events=sum(chain.events for chain in found),
            late=sum(chain.late for chain in found),
            skipped=_summed(chain.skipped for chain in found),
            rejected=_summed(chain.rejected for chain in found),
        )
        for feed, found in by_feed.items()
    )


def _summed(counts: Iterable[dict[str, int]]) -> dict[str, int]:
    total: dict[str, int] = {}
    for one in counts:
        for reason, number in one.items():
            total[reason] = total.get(reason, 0) + number
    return dict(sorted(total.items(), key=lambda item: (-item[1], item[0])))
