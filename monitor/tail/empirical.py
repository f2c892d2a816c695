"""What the data say without any law: sizes passed once in m events and shares above a size, with exact limits.

Source: limits of a quantile from order statistics, Conover, Practical Nonparametric Statistics, section 3.2;
limits of a share, Clopper & Pearson, Biometrika 26 (1934) 404. Both hold for tied and whole sizes, then with more
than 95 %.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import exp, floor, log

import numpy as np
from scipy.special import betainc, betaincinv

from monitor.tail.judgement import Interval, Level
from monitor.tail.sample import Sample
from storage.grid import cell_of, edges

_EACH_SIDE = 0.025


def empirical_levels(sample: Sample, one_in: tuple[int, ...]) -> tuple[Level, ...]:
    """The sizes passed once in m events by order statistics, one a level, whatever the law.

    size is None where the data do not reach that far (fewer than m events). The interval is an exact 95 % one for
    the quantile 1 - 1/m, or wider; its upper end is None while the sample is too small to bound it from above
    (about 3.7 m events are needed), its lower end is None only in samples of a few events. On the grid the size
    is placed geometrically inside its cell and the limits are the outer edges of theirs.
    """
    return tuple(_empirical_level(sample, events) for events in one_in)


def _empirical_level(sample: Sample, events: int) -> Level:
    size = empirical_size(sample, 1 / events) if sample.n >= events else None
    return Level(
        one_in=events,
        size=size,
        interval=empirical_interval(sample, 1 / events),
        beyond_data=beyond_data(size, sample),
    )


def beyond_data(size: float | None, sample: Sample) -> float | None:
    """How many times the largest size seen `size` is; None for an unknown size or a ratio beyond doubles."""
    if size is None:
        return None
    log_ratio = log(size) - log(float(sample.sizes[-1]))
    return exp(log_ratio) if log_ratio < 709 else None


def empirical_size(sample: Sample, chance: float) -> float:
    """The smallest size that at most the share `chance` of the events passes; on the grid inside its cell."""
    above = sample.n * chance
    if sample.cells is None:
        return _from_top(sample, min(floor(above * (1 + 1e-12)) + 1, sample.n))
    from_top = np.cumsum(sample.counts[::-1])
    place = min(int(np.searchsorted(from_top, above, side="right")), len(from_top) - 1)
    index = len(from_top) - 1 - place
    higher = float(from_top[place] - sample.counts[index])
    inside = min(max((above - higher) / float(sample.counts[index]), 0.0), 1.0)
    low, high = (float(edge) for edge in edges(sample.cells[index] + np.arange(2)))
    return float(high * (low / high) ** inside)


def empirical_interval(sample: Sample, chance: float) -> Interval:
    """Exact 95 % limits of the quantile 1 - chance; None for an end that the sample does not bound.

    Upper end: the a-th largest with P(Bin(n, chance) < a) <= .025, a as large as can be. Lower end: the b-th
    largest with P(Bin(n, chance) >= b) <= .025, b as small as can be.
    """
    n = sample.n
    # P(Bin >= j) = I_chance(j, n - j + 1) falls in j.
    upper = _last(lambda j: _at_least(j, n, chance) >= 1 - _EACH_SIDE, n)
    lower = _last(lambda j: _at_least(j, n, chance) > _EACH_SIDE, n) + 1
    high = None if upper == 0 else _from_top(sample, upper, top_edge=True)
    return (None if lower > n else _from_top(sample, lower)), high


def _at_least(j: int, n: int, chance: float) -> float:
    return 1.0 if j == 0 else float(betainc(j, n - j + 1, chance))


def _last(holds: Callable[[int], bool], n: int) -> int:
    """The largest j in 0..n for which `holds` (true at 0, then false for good)."""
    low, high = 0, n + 1
    while high - low > 1:
        middle = (low + high) // 2
        low, high = (middle, high) if holds(middle) else (low, middle)
    return low


def _from_top(sample: Sample, rank: int, *, top_edge: bool = False) -> float:
    """The rank-th largest size; on the grid the lower or upper edge of its cell."""
    from_top = np.cumsum(sample.counts[::-1])
    index = len(from_top) - 1 - int(np.searchsorted(from_top, rank))
    if top_edge and sample.cells is not None:
        return float(edges(sample.cells[index : index + 1] + 1)[0])
    return float(sample.sizes[index])


@dataclass(frozen=True, slots=True)
class Share:
    """A share of the events and its 95 % limits (Clopper & Pearson)."""

    share: float
    low: float
    high: float


def share_above(sample: Sample, size: float) -> Share:
    """The share of events that pass `size` (strictly); on the grid a cell is split geometrically."""
    above = float(sample.counts[sample.sizes > size].sum())
    if sample.cells is not None and size > 0:
        cell = int(cell_of(np.array([size]))[0])
        index = int(np.searchsorted(sample.cells, cell))
        if index < len(sample.cells) and sample.cells[index] == cell:
            low, high = (float(edge) for edge in edges(np.array([cell, cell + 1])))
            inside = np.log(high / size) / np.log(high / low)
            # The cell's own lower edge counts as above only when `size` lies below it, which it does not.
            above += float(sample.counts[index]) * float(inside)
    return _share(above, sample.n)


def _share(above: float, n: int) -> Share:
    low = 0.0 if above == 0 else float(betaincinv(above, n - above + 1, _EACH_SIDE))
    high = 1.0 if above >= n else float(betaincinv(above + 1, n - above, 1 - _EACH_SIDE))
    return Share(above / n, low, high)
