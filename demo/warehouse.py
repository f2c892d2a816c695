"""An invented parts warehouse: docks, orders by weight, and the changes that the story scripts.

Everything here is made up. The log depends on the seed alone: each dock and hour has its own generator, so
the same seed writes the same lines however fast they are written.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from datetime import UTC, datetime
from math import log

import numpy as np
from numpy.typing import NDArray

from monitor.alarms.priorities import Rule

HOUR = 3_600_000_000_000
DAY = 24 * HOUR
OPENING = int(datetime(2026, 3, 2, tzinfo=UTC).timestamp()) * 1_000_000_000
"""The story's first moment: a Monday, 00:00 UTC."""

TAIL_FROM = 20.0
"""kg from which order weights follow a power law."""
BODY_WIDTH = 0.6
"""Standard deviation of ln(weight) in the lognormal body below it."""
SPLIT_ABOVE = 80.0
"""kg above which the new rule splits an order."""


@dataclass(frozen=True, slots=True)
class Dock:
    """One dock's orders: how many a day, the exponent of their tail, and a cap if there is one.

    usual_alpha shapes the body, whose density meets the tail's without a step or a bend.
    """

    name: str
    orders_a_day: int
    usual_alpha: float
    alpha: float
    split_above: float | None = None


@dataclass(frozen=True, slots=True)
class Change:
    """Something that happens to a dock at a moment (ns), and what it is in words.

    named_by  the rules whose alarms say what happened; shift, of alpha, where that is what happened
    """

    dock: str
    at: int
    words: str
    alpha: float | None = None
    split_above: float | None = None
    named_by: tuple[Rule, ...] = ("exponent",)
    shift: float | None = None


DOCKS = (
    Dock("north", 16_000, 2.8, 2.8),
    Dock("south", 18_000, 2.65, 2.65),
    Dock("east", 14_000, 2.7, 2.7),
    Dock("west", 12_000, 2.6, 2.6),
)


def script(days: float) -> tuple[Change, ...]:
    """The changes of a story that lasts so many days: a quiet phase, then two docks change."""
    return (
        Change(
            "north", OPENING + round(0.55 * days * 24) * HOUR,
            "heavier orders: a new customer moves the exponent from 2.8 to 2.35", alpha=2.35,
            shift=2.35 - 2.8,
        ),
        Change(
            "south", OPENING + round(0.65 * days * 24) * HOUR,
            f"a new rule splits every order above {SPLIT_ABOVE:g} kg", split_above=SPLIT_ABOVE,
            named_by=("fit", "rival"),
        ),
    )  # fmt: skip


def dock_at(dock: Dock, moment: int, changes: tuple[Change, ...]) -> Dock:
    """The dock as it is at a moment, after the changes before it."""
    for change in changes:
        if change.dock == dock.name and change.at <= moment:
            dock = replace(
                dock,
                alpha=dock.alpha if change.alpha is None else change.alpha,
                split_above=dock.split_above if change.split_above is None else change.split_above,
            )
    return dock


def weights(dock: Dock, count: int, rng: np.random.Generator) -> NDArray[np.float64]:
    """Weights of orders in kg, to 10 g: a lognormal body below TAIL_FROM, a Pareto tail above."""
    # A lognormal density falls like x^-alpha where (ln x - mu) / width^2 = alpha - 1: there the tail takes over.
    mu = log(TAIL_FROM) - BODY_WIDTH**2 * (dock.usual_alpha - 1.0)
    body = np.exp(mu + BODY_WIDTH * rng.standard_normal(count))
    tail = TAIL_FROM * (1.0 - rng.random(count)) ** (-1.0 / (dock.alpha - 1.0))
    return np.maximum(np.round(np.where(body < TAIL_FROM, body, tail), 2), 0.01)


def split(order: float, most: float | None) -> list[float]:
    """An order as the parcels it is handled in: one, or equal parts that are no heavier than `most`."""
    if most is None or order <= most:
        return [order]
    parts = int(np.ceil(order / most))
    return [round(order / parts, 2)] * parts


def hour_of_orders(seed: int, hour: int, changes: tuple[Change, ...]) -> list[tuple[int, str]]:
    """The log lines of one hour of all docks, as (time ns, line), in the order they are written.

    One line in about 5 000 is spoilt, as in real logs; lines are up to 40 s out of order.
    """
    lines: list[tuple[int, int, str]] = []
    start = OPENING + hour * HOUR
    for place, usual in enumerate(DOCKS):
        rng = np.random.default_rng([seed, hour, place])
        count = int(rng.poisson(usual.orders_a_day / 24))
        moments = np.sort(start + (rng.random(count) * HOUR).astype(np.int64))
        dock = dock_at(usual, start, changes)
        delays = (rng.random(count) * 40e9).astype(np.int64)
        spoilt = rng.random(count) < 0.0002
        for number, weight in enumerate(weights(dock, count, rng).tolist()):
            stamp = datetime.fromtimestamp(int(moments[number]) / 1e9, UTC).strftime("%Y-%m-%dT%H:%M:%S.%fZ")
            for part, parcel in enumerate(split(weight, dock.split_above)):
                order = f"{dock.name[0].upper()}{hour:04d}-{number:04d}-{part}"
                size = "null" if spoilt[number] else f"{parcel:g}"
                text = f'{{"placed_at":"{stamp}","order":"{order}","dock":"{dock.name}","kg":{size}}}'
                lines.append((int(moments[number] + delays[number]), int(moments[number]), text))
    return [(written, text) for written, _, text in sorted(lines)]
