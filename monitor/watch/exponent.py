"""The exponent rule: has the mean log size of exceedances changed, hence alpha?

Scores of ln(x/xmin) are self-starting; the mixture looks both ways. Given the number of exceedances of a slot the
scores are independent Exp(1), so the products from each start point have mean 1: start points before every exceedance.
"""

from __future__ import annotations

import msgspec
import numpy as np

from monitor.watch.mixture import LOG_THETAS, Increment, exponential_factors, from_path, idle
from monitor.watch.scores import Past, self_starting
from monitor.watch.slots import Ordered


class ExponentStep(msgspec.Struct, frozen=True):
    """What the slot says, and the log sizes known after it."""

    increment: Increment
    past: Past


def step(past: Past, slot: Ordered, clock: float, hold: bool = False) -> ExponentStep:
    """Fold one slot. past: number and sum of the log sizes so far; clock: days; hold: learn nothing."""
    if not slot.y.size:
        return ExponentStep(idle(len(LOG_THETAS), clock), past)
    scored = self_starting(slot.y, past, hold)
    factors = exponential_factors(scored.scores, LOG_THETAS)
    factors[~scored.counted] = 0.0
    path = np.vstack((np.zeros((1, factors.shape[1])), np.cumsum(factors, axis=0)))
    return ExponentStep(from_path(path[:-1], path[-1], clock), scored.past)
