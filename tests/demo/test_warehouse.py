"""The invented warehouse: the same seed, the same log; tails as they are told."""

from __future__ import annotations

import json

import numpy as np
import pytest

from demo.warehouse import (
    DAY,
    DOCKS,
    HOUR,
    OPENING,
    SPLIT_ABOVE,
    TAIL_FROM,
    dock_at,
    hour_of_orders,
    script,
    split,
    weights,
)  # fmt: skip


def test_the_log_depends_on_the_seed_alone() -> None:
    assert hour_of_orders(3, 5, script(10)) == hour_of_orders(3, 5, script(10))
    assert hour_of_orders(3, 5, script(10)) != hour_of_orders(4, 5, script(10))


@pytest.mark.parametrize("dock", DOCKS, ids=lambda dock: dock.name)
def test_each_dock_has_the_tail_it_is_told_to_have(dock: object) -> None:
    """2n(alpha - 1)/(alpha_hat - 1) ~ chi2(2n): 4 standard errors, false failure once in 16 000 for each dock."""
    assert hasattr(dock, "alpha")
    sizes = weights(dock, 200_000, np.random.default_rng(1))  # type: ignore[arg-type]
    tail = sizes[sizes >= TAIL_FROM]
    rate = 1 / np.mean(np.log(tail / TAIL_FROM))
    assert rate == pytest.approx(dock.alpha - 1, rel=4 / np.sqrt(tail.size) + 0.001)


def test_the_changes_happen_when_the_script_says() -> None:
    north, south = script(10)
    assert OPENING < north.at < south.at < OPENING + 10 * DAY
    assert dock_at(DOCKS[0], north.at - 1, script(10)) == DOCKS[0]
    assert dock_at(DOCKS[0], north.at, script(10)).alpha == north.alpha
    assert dock_at(DOCKS[1], south.at, script(10)).split_above == SPLIT_ABOVE


def test_splitting_keeps_the_weight_and_the_cap() -> None:
    parts = split(1234.5, 100.0)
    assert max(parts) <= 100.0
    assert sum(parts) == pytest.approx(1234.5, abs=0.01 * len(parts))
    assert split(99.0, 100.0) == [99.0]


def test_lines_are_orders_with_a_few_spoilt_ones() -> None:
    changes = script(10)
    hour = (changes[1].at - OPENING) // HOUR + 1
    orders = [json.loads(line) for _, line in hour_of_orders(1, hour, changes)]
    assert {order["dock"] for order in orders} == {dock.name for dock in DOCKS}
    assert len({order["order"] for order in orders}) == len(orders)
    south = [order["kg"] for order in orders if order["dock"] == "south" and order["kg"] is not None]
    assert max(south) <= SPLIT_ABOVE
    spoilt = sum(json.loads(line)["kg"] is None for h in range(20) for _, line in hour_of_orders(1, h, changes))
    assert 0 < spoilt < 60
