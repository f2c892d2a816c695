"""The watch over panes: the same whatever the pieces, silent without a change, and right about one."""

from __future__ import annotations

import msgspec
import numpy as np
import pytest

from monitor.engine.watching import Watched, WatchOrder, measured, planned_watch, watched
from monitor.tail.judge import judge
from monitor.tail.judgement import Judgement, Options
from monitor.tail.sample import Sample
from monitor.watch import rules
from storage.facts import StoredPane
from storage.gathering import PaneBuilder
from storage.pane import add, digest

HOUR = 3_600_000_000_000
ORDER = WatchOrder(
    watch=None, state=None, holding=(), pane=HOUR, zone="UTC", baseline_tail=200, budget_days=90.0, passage=None,
    allowance=None,
)  # fmt: skip


def panes(count: int, *, alpha: float, seed: int, start: int = 0, events: int = 400) -> list[StoredPane]:
    """Hourly panes: a tenth of the events from a power law above 10, the rest uniform below."""
    rng = np.random.default_rng(seed)
    out = []
    for number in range(start, start + count):
        tail = 10 * (1 - rng.random(events // 10)) ** (-1 / (alpha - 1))
        sizes = np.concatenate((rng.uniform(1, 10, events - tail.size), tail))
        builder = PaneBuilder()
        builder.add(sizes, np.full(sizes.size, number * HOUR), 0, lambda i: ("00" * 8, ""))
        content = builder.build(10_000)
        out.append(StoredPane(start=number * HOUR, end=(number + 1) * HOUR, digest=digest(content), content=content))
    return out


def begun(order: WatchOrder = ORDER, alpha: float = 2.5) -> WatchOrder:
    watch = planned_watch("a", alpha, 10.0, order, "measured")
    return msgspec.structs.replace(order, watch=watch, state=rules.start(watch, 0))


def on(order: WatchOrder, found: Watched) -> WatchOrder:
    """The order after a step, through the JSON of the store."""
    text = msgspec.json.encode(found.state)
    return msgspec.structs.replace(order, state=msgspec.json.decode(text, type=rules.WatchState))


def test_pieces_do_not_matter() -> None:
    all_panes = panes(48, alpha=2.1, seed=1)
    order = begun()
    whole = watched("a", all_panes, 48 * HOUR, order)
    assert whole is not None
    told = []
    for end in (1, 2, 10, 11, 40, 48):
        piece = watched("a", all_panes, end * HOUR, order)
        assert piece is not None
        told += piece.told
        order = on(order, piece)
    assert order.state == whole.state
    # Rules that have spoken hold within one call; the first time each one spoke is the same either way.
    assert {one.spoken.rule: one.spoken.at_ns for one in reversed(told)} == {
        one.spoken.rule: one.spoken.at_ns for one in reversed(whole.told)
    }


def test_nothing_new_is_nothing() -> None:
    assert watched("a", (), 0, begun()) is None
    assert watched("a", (), 5 * HOUR, ORDER) is None


def test_no_change_is_silent() -> None:
    """20 days within a budget of 90: the chance of a false word is at most 20/90 for all rules; seed fixed."""
    found = watched("a", panes(480, alpha=2.5, seed=3), 480 * HOUR, begun())
    assert found is not None
    assert found.told == ()
    assert found.state.at_ns == 480 * HOUR
    assert found.state.exceedances == 480 * 40


def test_a_heavier_tail_is_told_with_its_time() -> None:
    """40 tail events an hour, 2.5 -> 2.1 after 100 hours: seen within about 400 tail events; set covers 95 %."""
    history = panes(100, alpha=2.5, seed=5) + panes(40, alpha=2.1, seed=6, start=100)
    found = watched("a", history, 140 * HOUR, begun())
    assert found is not None
    first = found.told[0]
    assert (first.spoken.rule, first.spoken.direction) == ("exponent", "heavier")
    assert 100 * HOUR < first.spoken.at_ns <= 125 * HOUR
    assert first.change is not None
    assert first.change.from_ns <= 101 * HOUR <= first.change.to_ns
    assert first.change.at_ns <= first.spoken.at_ns


def judged(listed: list[StoredPane]) -> Judgement:
    content = add((pane.content for pane in listed), 10**6)
    return judge(Sample(content.sizes, content.counts, content.cells), Options(replicates=200, rivals=False))


def test_the_first_baseline_takes_xmin_from_one_half_and_the_rest_from_the_other() -> None:
    listed = panes(40, alpha=2.5, seed=9)
    found = measured("a", listed, judged(listed), ORDER, "measured")
    assert found is not None
    assert found.baseline.events == 20 * 400
    assert 9.5 < found.baseline.yardstick.xmin < 25
    assert found.baseline.log_sizes.n == found.baseline.exceedances
    mean = found.baseline.log_sizes.total / found.baseline.log_sizes.n
    assert 1 / mean == pytest.approx(1.5, rel=0.2)
    few = msgspec.structs.replace(ORDER, baseline_tail=10**6)
    assert measured("a", listed, judged(listed), few, "measured") is None


def test_empty_panes_are_slots_too() -> None:
    """A stream that falls silent: the open gap does not count as an exceedance, and the clock goes on."""
    order = begun()
    found = watched("a", panes(50, alpha=2.5, seed=2), 50 * HOUR, order)
    assert found is not None
    later = watched("a", (), 60 * HOUR, on(order, found))
    assert later is not None
    assert later.state.at_ns == 60 * HOUR
    assert later.state.events == found.state.events
    assert later.state.days == pytest.approx(60 / 24)
