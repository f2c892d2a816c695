"""What watching compares with, measured from slots that took no part in choosing xmin.

xmin is chosen on the first half of a baseline; the numbers here come from the second half, so that the scores of
everything after it are exactly standard exponential. Scoring the same events that xmin was chosen on would make the
run length a measured one instead of a proved one.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import msgspec
import numpy as np

from monitor.watch import groups, no_events, tail_share
from monitor.watch.level import Allowance
from monitor.watch.rejects import UsualRejects, usual
from monitor.watch.scores import Past
from monitor.watch.slots import SlotFacts, Yardstick, ordered

_HOUR_NS = 3_600_000_000_000


class Baseline(msgspec.Struct, frozen=True, kw_only=True):
    """What a stream is compared with. Stored with the baseline; everything else is re-derived from it.

    alpha      density exponent at the frozen xmin; None: no plausible power law, so exponent, fit and rival rest
    log_sizes  number and sum of the log sizes over xmin (n, S); `known` with mean 1/(alpha - 1) for a planned tail
    gaps       number and sum of g - 1/2 of the gaps between exceedances (G)
    open_gap   events since the last exceedance
    exchanged  whether gaps run between events below xmin (share above one half)
    events, exceedances, days  what it was measured on; 0 for a plan
    week       events an hour for each hour of the week, empty when unknown
    rejects    the usual share of rejected lines, None when lines were not counted
    allowance  how often Yardstick.passage may be passed, None when nothing was agreed
    cvs, longests  statistics of its groups of exceedances
    largest    the largest size, 0 when unknown
    """

    stream: str
    yardstick: Yardstick
    alpha: float | None
    log_sizes: Past
    gaps: Past = Past()
    open_gap: int = 0
    exchanged: bool = False
    events: int = 0
    exceedances: int = 0
    days: float = 0.0
    week: tuple[float, ...] = ()
    rejects: UsualRejects | None = None
    allowance: Allowance | None = None
    cvs: tuple[float, ...] = ()
    longests: tuple[float, ...] = ()
    largest: float = 0.0

    @property
    def share(self) -> float | None:
        """Share of events at or above xmin, None when nothing was measured."""
        return self.exceedances / self.events if self.events else None

    @property
    def exceedances_a_day(self) -> float:
        """Exceedances a day, 0 when unknown."""
        return self.exceedances / self.days if self.days > 0 else 0.0

    @property
    def events_a_day(self) -> float:
        """Events a day, 0 when unknown."""
        return self.events / self.days if self.days > 0 else 0.0


def planned(stream: str, alpha: float, yardstick: Yardstick, allowance: Allowance | None = None) -> Baseline:
    """The baseline of a tail that was planned on: its exponent counts as known, all else is learned on the way."""
    return Baseline(
        stream=stream,
        yardstick=yardstick,
        alpha=alpha,
        log_sizes=Past(1.0, 1.0 / (alpha - 1.0), known=True),
        allowance=allowance,
    )


def measured(
    slots: Sequence[SlotFacts],
    *,
    yardstick: Yardstick,
    alpha: float | None,
    allowance: Allowance | None = None,
    plan: Baseline | None = None,
) -> Baseline:
    """The baseline of a stretch of slots (or of whole panes written as slots), in order of time.

    alpha: the exponent fitted at the frozen xmin, None when no power law is plausible. plan: a planned baseline,
    whose known exponent is kept while shares, rates and shapes are measured. Raises ValueError without a slot.
    """
    if not slots:
        raise ValueError("a baseline needs at least one slot")
    events = sum(slot.events for slot in slots)
    exceedances = sum(slot.exceedances for slot in slots)
    exchanged = 2 * exceedances > events
    days = sum(slot.days for slot in slots)
    sizes = Past()
    share = tail_share.ShareState(Past(), exchanged=exchanged)
    shapes = groups.GroupState()
    law = groups.law_for(slots[0].stream, yardstick, alpha or 2.0, exceedances / days)
    for slot in slots:
        order = ordered(slot, yardstick)
        sizes = sizes.with_more(int(order.y.size), float(np.cumsum(np.append(0.0, order.y))[-1]))
        share = tail_share.step(share, order, slot.days).state
        shapes = groups.step(shapes, order.y, law).state
    return Baseline(
        stream=slots[0].stream,
        yardstick=yardstick,
        alpha=plan.alpha if plan is not None else alpha,
        log_sizes=plan.log_sizes if plan is not None else sizes,
        gaps=share.past,
        open_gap=share.open_gap,
        exchanged=exchanged,
        events=events,
        exceedances=exceedances,
        days=days,
        week=_week(slots),
        rejects=usual(tuple(slot.rejected / slot.lines for slot in slots if slot.lines)),
        allowance=allowance,
        cvs=shapes.cvs,
        longests=shapes.longests,
        largest=max((slot.largest for slot in slots if slot.largest is not None), default=0.0),
    )


def _week(slots: Iterable[SlotFacts]) -> tuple[float, ...]:
    """Rates by hour of the week; empty when slots do not say their hour or are longer than one."""
    events, hours = [0] * no_events.HOURS, [0.0] * no_events.HOURS
    for slot in slots:
        if not 0 <= slot.hour < no_events.HOURS or slot.length_ns > _HOUR_NS:
            return ()
        events[slot.hour] += slot.events
        hours[slot.hour] += slot.length_ns / _HOUR_NS
    return no_events.week_rates(events, hours)
