"""What other budgets would have said on the same past: the watch folded again over stored panes, for each of them."""

from __future__ import annotations

from collections.abc import Sequence

import msgspec

from monitor.engine.watching import WatchOrder, watched
from monitor.watch import dependence, rules
from monitor.watch.slots import SlotFacts, facts_of
from storage.facts import StoredPane

FACTORS = (0.1, 0.25, 0.5, 1.0, 2.0, 4.0)


class Trial(msgspec.Struct, frozen=True, kw_only=True):
    """One budget on one stream's past.

    budget_days  mean days between false alarms allowed
    spoke        rule -> when it first spoke (ns)
    by_chance    alarms to be expected by chance alone over the days watched, at most
    """

    budget_days: float
    days: float
    spoke: dict[str, int]
    by_chance: float


def trials(stream: str, panes: Sequence[StoredPane], watch: rules.Watch, start: int, order: WatchOrder) -> list[Trial]:
    """The same watch with shorter and longer budgets, over the panes from `start` (ns) on, by time."""
    later = [pane for pane in panes if pane.start >= start]
    if not later:
        return []
    end = later[-1].end
    out = []
    for factor in FACTORS:
        other = rules.begin(watch.baseline, watch.budget_days * factor)
        asked = msgspec.structs.replace(order, watch=other, state=rules.start(other, start))
        found = watched(stream, later, end, asked)
        spoke: dict[str, int] = {}
        for told in found.told if found else ():
            spoke.setdefault(told.spoken.rule, told.spoken.at_ns)
        days = (end - start) / 86_400e9
        out.append(Trial(budget_days=other.budget_days, days=days, spoke=spoke, by_chance=days / other.budget_days))
    return out


def ground_of(stream: str, panes: Sequence[StoredPane], watch: rules.Watch, order: WatchOrder) -> dependence.Ground:
    """On which ground the promise stands, on the whole past at hand (block bootstrap where it is long enough)."""
    contents = {pane.start: pane.content for pane in panes}
    slots = []
    for start in range(panes[0].start, panes[-1].end, order.pane):
        slot = SlotFacts(stream=stream, start_ns=start, length_ns=order.pane)
        content = contents.get(start)
        if content is not None:
            slot = facts_of(content.sizes, content.counts, slot, watch.baseline.yardstick)
        slots.append(slot)
    return dependence.ground(
        slots,
        watch.baseline.yardstick,
        budget_days=order.budget_days,
        prior=max(2, watch.baseline.exceedances),
        exponent=watch.baseline.alpha is not None,
    )
