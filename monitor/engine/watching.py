"""The watch of a stream inside the engine: which slots are scored, against what, and what comes of it.

A slot of the watch is a sealed pane: its content is additive and final, so what the rules read depends on the
lines alone, and can be read again from the panes at any time. Panes without events are slots too: silence is
evidence. All of this is pure and runs where the panes are at hand: in the worker, or again when a verdict is
re-derived.
"""

from __future__ import annotations

from collections.abc import Sequence
from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import msgspec
import numpy as np

from monitor.plan import StreamPlan
from monitor.plan.spans import DAY
from monitor.tail.judgement import Counting, Judgement, Options
from monitor.tail.sample import Sample
from monitor.tail.scan import find_tail
from monitor.tail.tail_fit import NoTail
from monitor.watch import baseline as baselines
from monitor.watch import dependence, rules
from monitor.watch.baseline import Baseline
from monitor.watch.changepoint import Change, changed, share_history, size_history
from monitor.watch.level import Allowance
from monitor.watch.slots import SlotFacts, Yardstick, facts_of
from storage.facts import StoredPane
from storage.grid import cell_of
from storage.pane import Pane, add

_HOUR = 3_600_000_000_000


class WatchOrder(msgspec.Struct, frozen=True, kw_only=True):
    """What the worker is told about the watch of a stream, beside the window to judge.

    watch, state   in force and where it stands; None: there is none yet
    holding        rules whose alarm stands
    pane           length of a pane, ns
    zone           where the stream's hours of the week are counted
    baseline_tail  tail events that the first baseline must have; None: a baseline is not wanted
    budget_days    mean days between false alarms of this stream
    passage, allowance  the size that is watched for, and how often it may be passed
    """

    watch: rules.Watch | None
    state: rules.WatchState | None
    holding: tuple[rules.RuleName, ...]
    pane: int
    zone: str
    baseline_tail: int | None
    budget_days: float
    passage: float | None
    allowance: Allowance | None


class Told(msgspec.Struct, frozen=True, kw_only=True):
    """A rule that spoke, and when the change began as far as the panes at hand tell."""

    spoken: rules.Spoken
    change: Change | None


class Watched(msgspec.Struct, frozen=True, kw_only=True):
    """What the watch says after a pane: where it stands, what each rule reads, which of them speak."""

    state: rules.WatchState
    readings: tuple[rules.Reading, ...]
    told: tuple[Told, ...]


class Measured(msgspec.Struct, frozen=True, kw_only=True):
    """A baseline measured for watching, and on which ground its promise stands."""

    baseline: Baseline
    ground: dependence.Ground


def allowance_of(plan: StreamPlan) -> Allowance | None:
    """How often the limit may be passed, as the settings agree it."""
    if plan.limit is None or plan.limit_at_most is None:
        return None
    return Allowance(a_day=plan.limit_at_most.times / (plan.limit_at_most.period / DAY))


def slot_of(stream: str, start: int, pane: Pane | None, order: WatchOrder, yardstick: Yardstick) -> SlotFacts:
    """One pane as a slot; None is a pane without events."""
    slot = SlotFacts(stream=stream, start_ns=start, length_ns=order.pane, hour=_hour_of_week(start, order))
    return slot if pane is None else facts_of(pane.sizes, pane.counts, slot, yardstick)


def _hour_of_week(start: int, order: WatchOrder) -> int:
    """0 = Monday 00-01 where the stream lives; -1 for panes that are longer than an hour."""
    if order.pane > _HOUR:
        return -1
    local = (datetime(1970, 1, 1, tzinfo=UTC) + timedelta(microseconds=start // 1000)).astimezone(ZoneInfo(order.zone))
    return local.weekday() * 24 + local.hour


def watched(stream: str, panes: Sequence[StoredPane], end: int, order: WatchOrder) -> Watched | None:
    """Fold every slot up to `end` that was not folded yet. None when there is no watch, or nothing new.

    Parameters: panes, those at hand (the window), by time; slots without one are slots without events.
    """
    if order.watch is None or order.state is None or order.state.at_ns >= end:
        return None
    yardstick = order.watch.baseline.yardstick
    contents = {pane.start: pane.content for pane in panes}
    state, told = order.state, list[Told]()
    readings: tuple[rules.Reading, ...] = ()
    holding = frozenset(order.holding)
    for start in range(order.state.at_ns, end, order.pane):
        found = rules.step(order.watch, state, slot_of(stream, start, contents.get(start), order, yardstick), holding)
        state, readings = found.state, found.readings
        told += [Told(spoken=one, change=_change(stream, one, panes, order)) for one in found.spoken]
        holding |= {one.rule for one in found.spoken}
    return Watched(state=state, readings=readings, told=tuple(told))


def _change(stream: str, spoken: rules.Spoken, panes: Sequence[StoredPane], order: WatchOrder) -> Change | None:
    """When the exponent or the tail share changed, searched in the panes at hand since evidence was gathered."""
    assert order.watch is not None
    if spoken.rule not in ("exponent", "tail share") or spoken.direction is None:
        return None
    first = min((pane.start for pane in panes), default=spoken.at_ns)
    contents = {pane.start: pane.content for pane in panes}
    yardstick = order.watch.baseline.yardstick
    slots = [
        slot_of(stream, start, contents.get(start), order, yardstick)
        for start in range(max(first, spoken.since_ns), spoken.at_ns, order.pane)
    ]
    if not slots:
        return None
    heavier = spoken.direction == "heavier"
    if spoken.rule == "exponent":
        return changed(size_history(slots, yardstick, spoken.log_sizes), grew=heavier)
    exchanged = order.watch.baseline.exchanged
    return changed(share_history(slots, spoken.gaps, exchanged), grew=heavier == exchanged)


def measured(
    stream: str, panes: Sequence[StoredPane], judgement: Judgement, order: WatchOrder, counting: Counting
) -> Measured | None:
    """The automatic baseline from a window's panes: xmin from the first half, everything else from the second.

    None when the window has too little tail, or none. With a single pane there are no halves: the same events
    then serve both, and the run length is measured instead of proved (statistics of the watch, slots).
    """
    enough = (
        judgement.n_tail is not None and order.baseline_tail is not None and judgement.n_tail >= order.baseline_tail
    )
    if not enough or judgement.xmin is None or not panes:
        return None
    middle = (panes[0].start + panes[-1].end) // 2
    first = [pane for pane in panes if pane.end <= middle] or list(panes)
    second = [pane for pane in panes if pane.end > middle] or list(panes)
    yardstick = _yardstick(add((pane.content for pane in first), 10**9), judgement, order, counting)
    contents = {pane.start: pane.content for pane in second}
    slots = [
        slot_of(stream, start, contents.get(start), order, yardstick)
        for start in range(second[0].start, second[-1].end, order.pane)
    ]
    plausible = judgement.gof is None or judgement.gof.plausible
    found = baselines.measured(
        slots, yardstick=yardstick, alpha=judgement.alpha if plausible else None, allowance=order.allowance
    )
    ground = dependence.ground(
        slots, yardstick, budget_days=order.budget_days, prior=found.exceedances, exponent=found.alpha is not None
    )
    return Measured(baseline=found, ground=ground)


def _yardstick(first: Pane, judgement: Judgement, order: WatchOrder, counting: Counting) -> Yardstick:
    fit = find_tail(Sample(first.sizes, first.counts, first.cells), Options(counting=counting))
    assert judgement.xmin is not None
    xmin = judgement.xmin if isinstance(fit, NoTail) else fit.xmin
    on_grid = first.cells is not None or judgement.resolution == "grid"
    k0 = int(cell_of(np.array([xmin]))[0]) if on_grid else None
    return Yardstick(xmin=xmin, counting=counting, k0=k0, passage=order.passage)


def planned_watch(stream: str, alpha: float, xmin: float, order: WatchOrder, counting: Counting) -> rules.Watch:
    """The watch against a planned tail: its exponent counts as known, all else is learned on the way."""
    yardstick = Yardstick(xmin=xmin, counting=counting, passage=order.passage)
    return rules.begin(baselines.planned(stream, alpha, yardstick, order.allowance), order.budget_days)
