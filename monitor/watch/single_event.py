"""The single-event rule: one size so large that it must be told at once.

Two grounds:
above   a passage of the watched size, where passages are agreed to be rare. That is a fact, not an inference: it spends
        no part of the false-alarm budget.
chance  so large that the baseline's tail hardly allows it. The self-starting score z of an exceedance is Exp(1), so
        its chance is e^-z; it speaks at e^-z <= a. The levels a are paid from a credit that grows by w/N a day, and
        each is fixed before the size is seen, so the expected number of false alarms in a span t is at most
        t w / N, whatever the rate of events (alpha investing: D. Foster & R. Stine, Journal of the Royal Statistical
        Society B 70 (2008)). At the baseline's rate a exceedance costs what it earns; a burst pays from what is left.
Without a plausible power law the chance of m events holding a new record after n earlier ones, m/(m + n), takes the
place of e^-z.
"""

from __future__ import annotations

from math import exp

import msgspec
import numpy as np

from monitor.watch.scores import Past, self_starting
from monitor.watch.slots import Ordered, SlotFacts

ABOVE, CHANCE = "above the limit", "larger than the tail allows"


class SinglePlan(msgspec.Struct, frozen=True, kw_only=True):
    """credit_a_day: w / N; level: the most that is spent on one exceedance; tells_passages; by_record: no power law."""

    credit_a_day: float
    level: float
    tells_passages: bool
    by_record: bool


class SingleState(msgspec.Struct, frozen=True):
    """Unspent credit, exceedances seen and the largest size of them all."""

    credit: float = 0.0
    seen: int = 0
    largest: float = 0.0


class SingleStep(msgspec.Struct, frozen=True):
    """Why the rule speaks, None if it does not; chance of so large an event; and the state after the slot."""

    cause: str | None
    chance: float | None
    state: SingleState


def plan_for(*, days_between: float, exceedances_a_day: float, tells_passages: bool, by_record: bool) -> SinglePlan:
    """The rule for a stream whose false alarms may come once in `days_between` (N / w)."""
    credit = 1.0 / days_between
    level = credit / exceedances_a_day if exceedances_a_day > 0 else 1.0
    return SinglePlan(credit_a_day=credit, level=level, tells_passages=tells_passages, by_record=by_record)


def step(state: SingleState, slot: SlotFacts, order: Ordered, past: Past, plan: SinglePlan) -> SingleStep:
    """Fold one slot. past: log sizes known before it (the exponent rule's)."""
    credit = state.credit + plan.credit_a_day * slot.days
    m = int(order.y.size)
    told = ABOVE if plan.tells_passages and slot.passages else None
    if not m or slot.largest is None:
        return SingleStep(told, None, SingleState(credit, state.seen, state.largest))
    # Half of the credit at most, so that a burst never leaves the next slot without any.
    level = min(plan.level, 0.5 * credit / m)
    if plan.by_record:
        chance = m / (m + state.seen) if slot.largest > state.largest else 1.0
        speaks = chance <= level * m
    else:
        scored = self_starting(order.y, past)
        chance = exp(-float(np.max(scored.scores)))
        speaks = chance <= level
    after = SingleState(credit - level * m, state.seen + m, max(state.largest, slot.largest))
    return SingleStep(told or (CHANCE if speaks else None), chance, after)
