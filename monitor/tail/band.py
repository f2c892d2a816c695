"""How sure a fitted tail is, size by size: the 95 % band of its survival function from the bootstrap's refits."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from monitor.tail.empirical import share_above
from monitor.tail.judgement import Counting, Interval
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import Draws
from monitor.tail.tails import Floats, Tails, order_limits

FEWEST_DRAWS = 39
"""Fewer have no order statistics for 95 %."""


@dataclass(frozen=True, slots=True)
class Band:
    """Limits of the share of all events at or above each size, float64 (k,) each; NaN where nothing is known.

    They hold at each size taken alone (pointwise), not for the whole curve at once.
    """

    low: Floats
    high: Floats


def survival_band(sample: Sample, draws: Draws | None, sizes: Floats, counting: Counting) -> Band | None:
    """The band at `sizes`, float64 (k,), all > 0, by order statistics: the 10th and 391st of 400 refits.

    These are the limits that `Judgement.limit` rests on. A refit whose tail begins above a size says nothing
    there; where more than 1 in 40 do, the limits are widened to hold the exact ones of the counted share.
    None with fewer than 39 refits.
    """
    if draws is None or draws.alpha.size < FEWEST_DRAWS:
        return None
    tails = Tails.of_draws(draws, counting)
    ends = [_limits(sample, tails, float(size)) for size in sizes]
    low, high = ([np.nan if end is None else end for end in side] for side in zip(*ends, strict=True))
    return Band(np.array(low), np.array(high))


def _limits(sample: Sample, tails: Tails, size: float) -> Interval:
    counted = share_above(sample, float(np.nextafter(size, 0.0)))  # at or above: above the number just below
    return order_limits(tails.at_or_above(size), missing=(counted.low, counted.high))
