"""The run length on a stream's own past: what the promise rests on when events depend on one another.

The proof of the bound needs scores that are unpredictable from the past. Repeats, bursts and daily cycles break
that; so the past is resampled in blocks, long enough to hold the dependence (whole weeks, days, or runs of slots, in
that order of preference), and the budget is raised until the rules keep it there (block bootstrap: H. Kunsch, Annals
of Statistics 17 (1989)). Each path draws a past of the baseline's length, takes sums from it afresh, and then a future
that follows it, order inside blocks kept.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import ceil, log
from typing import Literal

import msgspec
import numpy as np
from numpy.typing import NDArray
from scipy.special import gammaincinv

from monitor.watch.keyed import key_of, uniforms
from monitor.watch.mixture import LOG_THETAS, crossings, exponential_factors
from monitor.watch.rules import WEIGHTS, RuleName
from monitor.watch.scores import Past, self_starting
from monitor.watch.slots import SlotFacts, Yardstick, ordered

Row = NDArray[np.float64]
Blocks = Literal["weeks", "days", "slots"]

RAISE = 1.25
FUTURE = 60
"""Budgets that are simulated: enough that chance alone seldom asks for a raise."""

PATHS = 20

_DAY_NS = 86_400_000_000_000
_MOST_RAISES = 40


class Ground(msgspec.Struct, frozen=True, kw_only=True):
    """The budget that keeps the promise, and on which ground.

    budget_days    to be given to rules.begin
    kept           False: no raise was enough, the largest one tried stands in budget_days, and nothing is promised
    promised_days  what the stream then keeps
    blocks, number of blocks that were resampled; None and 0: the promise rests on independence
    alarms, days   false alarms in the last simulation and its length
    words          the ground, for people
    """

    budget_days: float
    promised_days: float
    blocks: Blocks | None
    number: int
    alarms: int
    days: float
    words: str
    kept: bool = True


class _Block(msgspec.Struct, frozen=True):
    """One block: log sizes of its exceedances, their places among its events and their times in days."""

    y: Row
    places: NDArray[np.int64]
    times: Row
    events: int
    days: float


class _Path(msgspec.Struct, frozen=True):
    """Log factors of both rules on one resampled path, ln of the clock of each step for either, and its length."""

    sizes: Row
    gaps: Row
    ln_clock: Row
    ln_clock_before: Row
    days: float


def ground(
    slots: Sequence[SlotFacts],
    yardstick: Yardstick,
    *,
    budget_days: float,
    prior: int,
    exponent: bool = True,
    most: int = 400_000,
) -> Ground:
    """The budget raised until the exponent and the tail-share rule keep it on the stream's own past.

    Parameters: slots, the past without a known change, in order of time, without gaps; prior, exceedances of the
    baseline; exponent, whether that rule is watched; most, exceedances simulated at most. Where FUTURE budgets hold
    more, two shorter budgets are tried and the raise is extrapolated by their slope, and the words say so.
    """
    kind, blocks = _blocks(slots, yardstick)
    exceedances = sum(block.y.size for block in blocks)
    if kind is None or exceedances < 100:
        return _independent(budget_days)
    a_day = exceedances / sum(block.days for block in blocks)
    tried = min(budget_days, most / (FUTURE * a_day))
    rules: tuple[RuleName, ...] = ("exponent", "tail share") if exponent else ("tail share",)
    paths = _paths(blocks, prior, FUTURE * tried, key_of("ground", slots[0].stream, slots[0].start_ns))
    found = _raised(paths, tried, rules)
    raised = found.budget * (budget_days / tried)
    if not found.kept:
        words = f"nothing is promised: on the stream's own past ({len(blocks)} {kind}) no budget tried was kept"
        return _stated(raised, budget_days, kind, len(blocks), found, words)
    words = f"measured on the stream's own past ({len(blocks)} {kind} resampled)"
    if tried < budget_days:
        shorter = _raised(paths, tried / 4.0, rules)
        slope = 0.0
        if shorter.kept:
            slope = max(0.0, log(found.budget / tried / (shorter.budget / (tried / 4.0))) / log(4.0))
        raised *= (budget_days / tried) ** slope
        words += f", up to {tried:.3g} days between false alarms and extrapolated from there"
    return _stated(raised, budget_days, kind, len(blocks), found, words)


def _independent(budget_days: float) -> Ground:
    return Ground(
        budget_days=budget_days,
        promised_days=budget_days,
        blocks=None,
        number=0,
        alarms=0,
        days=0.0,
        words="rests on independence: the stream's past is too short to be resampled",
    )


class _Raised(msgspec.Struct, frozen=True):
    budget: float
    alarms: int
    days: float
    kept: bool = True


def _stated(budget: float, promised: float, kind: Blocks, number: int, found: _Raised, words: str) -> Ground:
    return Ground(
        budget_days=budget,
        promised_days=promised,
        blocks=kind,
        number=number,
        alarms=found.alarms,
        days=found.days,
        words=words,
        kept=found.kept,
    )


def _raised(paths: Sequence[_Path], budget: float, rules: Sequence[RuleName]) -> _Raised:
    """The least budget, raised by steps, whose false alarms stay within what `budget` allows these rules."""
    days = sum(path.days for path in paths)
    allowed = days * sum(WEIGHTS[rule] for rule in rules) / budget

    def alarms(raises: int) -> int:
        return sum(_alarms(path, budget * RAISE**raises, rule) for path in paths for rule in rules)

    def keeps(count: int) -> bool:
        # Upper 90 % bound of a Poisson mean after `count` alarms.
        return float(gammaincinv(count + 1, 0.9)) <= allowed

    # Galloping, then halving: alarms fall as the budget grows.
    low, high = -1, 0
    while not keeps(count := alarms(high)):
        if high >= _MOST_RAISES:
            return _Raised(budget * RAISE**high, count, days, kept=False)
        low, high = high, min(max(1, 2 * high), _MOST_RAISES)
    while high - low > 1:
        middle = (low + high) // 2
        if keeps(found := alarms(middle)):
            high, count = middle, found
        else:
            low = middle
    return _Raised(budget * RAISE**high, count, days)


def _alarms(path: _Path, budget: float, rule: RuleName) -> int:
    sizes = rule == "exponent"
    factors, clock = (path.sizes, path.ln_clock) if sizes else (path.gaps, path.ln_clock_before)
    return int(crossings(factors, clock, log(budget / WEIGHTS[rule])).size)


def _paths(blocks: Sequence[_Block], prior: int, days: float, key: int) -> list[_Path]:
    """`PATHS` resampled paths whose futures together last `days`, each with a past of its own.

    Alarms come in clusters: a past that happens to be off brings many. So pasts must be many, not futures long.
    """
    past = max(1, round(prior * len(blocks) / sum(block.y.size for block in blocks)))
    future = max(1, ceil(days / PATHS * len(blocks) / sum(block.days for block in blocks)))
    places = (uniforms(key, 0, PATHS * (past + future)) * len(blocks)).astype(np.int64).reshape(PATHS, past + future)
    return [_path([blocks[i] for i in row[:past]], [blocks[i] for i in row[past:]]) for row in places]


def _path(past: Sequence[_Block], future: Sequence[_Block]) -> _Path:
    before = _joined(past)
    after = _joined(future)
    m = int(before.y.size)
    sizes = self_starting(after.y, Past(float(m), float(before.y.sum())))
    gaps = np.diff(np.concatenate(([0], after.places)))
    known = Past(float(m), float(max(before.events - 0.5 * m, 0.0)) if m else 0.0)
    shares = self_starting(np.maximum(gaps - 0.5, 0.0), known)
    clock = np.maximum(np.diff(np.concatenate(([0.0], after.times))), 1e-9)
    return _Path(
        exponential_factors(sizes.scores, LOG_THETAS),
        exponential_factors(shares.scores, LOG_THETAS),
        np.log(clock),
        # The clock that passes in a gap goes with its length: starts are added when it is over.
        np.log(np.concatenate((clock[:1] * 0 + 1e-9, clock[:-1]))),
        after.days,
    )


def _joined(blocks: Sequence[_Block]) -> _Block:
    events = np.concatenate(([0], np.cumsum([block.events for block in blocks])))
    days = np.concatenate(([0.0], np.cumsum([block.days for block in blocks])))
    return _Block(
        np.concatenate([block.y for block in blocks]),
        np.concatenate([block.places + start for block, start in zip(blocks, events, strict=False)]),
        np.concatenate([block.times + start for block, start in zip(blocks, days, strict=False)]),
        int(events[-1]),
        float(days[-1]),
    )


def _blocks(slots: Sequence[SlotFacts], yardstick: Yardstick) -> tuple[Blocks | None, list[_Block]]:
    """The past cut into whole weeks if there are 8, else whole days if 20, else 20 runs of slots or more."""
    if not slots:
        return None, []
    first = slots[0].start_ns
    for kind, length, least in (("weeks", 7 * _DAY_NS, 8), ("days", _DAY_NS, 20)):
        whole = (slots[-1].end_ns - first) // length
        if whole >= least:
            parts: list[list[SlotFacts]] = [[] for _ in range(whole)]
            for slot in slots:
                place = (slot.start_ns - first) // length
                if place < whole:
                    parts[place].append(slot)
            return ("weeks" if kind == "weeks" else "days"), [_block(part, yardstick) for part in parts if part]
    run = len(slots) // 30
    if run < 10:  # a block must be longer than the dependence it is to keep
        return None, []
    return "slots", [_block(slots[i : i + run], yardstick) for i in range(0, len(slots) - run + 1, run)]


def _block(slots: Sequence[SlotFacts], yardstick: Yardstick) -> _Block:
    orders = [ordered(slot, yardstick) for slot in slots]
    events = np.concatenate(([0], np.cumsum([slot.events for slot in slots])))
    days = np.concatenate(([0.0], np.cumsum([slot.days for slot in slots])))
    times = [
        begin + order.places / slot.events * slot.days if slot.events else np.empty(0)
        for order, slot, begin in zip(orders, slots, days, strict=False)
    ]
    return _Block(
        np.concatenate([order.y for order in orders]),
        np.concatenate([order.places + start for order, start in zip(orders, events, strict=False)]),
        np.concatenate(times),
        int(events[-1]),
        float(days[-1]),
    )
