"""The logarithmic plane that a tail is drawn on: its ends, its ticks, and sizes and shares as pixels."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, floor, log10

import numpy as np
from numpy.typing import NDArray

from monitor.render.numbers import at_place, count_text
from monitor.tail.judgement import Judgement
from monitor.tail.sample import Sample

Floats = NDArray[np.float64]

LEAST_SPAN = 0.01
"""Decades across: sizes closer together than 2.3 % are drawn as close together as they are."""
_LAST_LOG = 307.0
_FARTHEST_LIMIT = 3.0
"""Decades beyond the data at which a limit is still drawn; further out it would press the data into a corner."""
_NARROW = 0.6
"""Decades; on a narrower axis multiples of powers of ten are no help between the ticks."""
_STEPS = ((1.0,), (1.0, 2.0, 5.0))
_MOST_TICKS = 9
_CELL = 0.6
"""Pixels: of data points inside one such square the first alone is drawn."""


@dataclass(frozen=True, slots=True)
class Tick:
    """A place on an axis, as its power of ten, and what is written there."""

    place: float
    words: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Plane:
    """Powers of ten at the left, right and lower end (the upper end is a share of 1), and the pixels they lie at."""

    left: float
    right: float
    bottom: float
    x0: float
    x1: float
    y0: float
    y1: float

    def x(self, log_size: Floats) -> Floats:
        """Pixels from the left of sizes given as powers of ten."""
        return self.x0 + (log_size - self.left) / (self.right - self.left) * (self.x1 - self.x0)

    def y(self, log_share: Floats) -> Floats:
        """Pixels from the top of shares given as powers of ten."""
        return self.y0 + log_share / self.bottom * (self.y1 - self.y0)

    def holds(self, log_size: float) -> bool:
        """Does this size lie between the left and the right end?"""
        return self.left <= log_size <= self.right


@dataclass(frozen=True, slots=True)
class Ends:
    """The three ends of a plane, as powers of ten."""

    left: float
    right: float
    bottom: float


def ends_of(sample: Sample, judgement: Judgement, limit: float | None) -> Ends:
    """Ends that hold the data, the start of the tail, a limit not too far out and the fit's share there.

    The body gets at most half of the width: what lies further left is left out. The lower end lies under the
    share of one event.
    """
    xmin = judgement.xmin
    data = np.log10(sample.sizes[sample.sizes > 0])
    low, high = (float(data[0]), float(data[-1])) if data.size else (0.0, 1.0)
    right = high
    if limit is not None and high < log10(limit) <= high + _FARTHEST_LIMIT:
        right = log10(limit)
    right = min(max(right, low + LEAST_SPAN / 2) + 0.04 * max(right - max(low, right - 5), LEAST_SPAN), _LAST_LOG)
    if xmin is not None:
        low = max(low, log10(xmin) - max(right - log10(xmin), LEAST_SPAN))
    if limit is not None and low - _FARTHEST_LIMIT <= log10(limit) < low:
        low = log10(limit)
    bottom = -log10(max(sample.n, 10)) - 0.3
    lowest = bottom - (1.0 if limit is None else _FARTHEST_LIMIT)
    bottom = min(bottom, max(_log_share_at(judgement, right), lowest))
    return Ends(low - max(0.02 * (right - low), LEAST_SPAN - (right - low)), right, bottom)


def _log_share_at(judgement: Judgement, log_size: float) -> float:
    """Power of ten of the share at or above a size by the fitted (measured) law, a little lower."""
    alpha, xmin, n_tail = judgement.alpha, judgement.xmin, judgement.n_tail
    if alpha is None or xmin is None or not n_tail:
        return 0.0
    return log10(n_tail / judgement.n) - (alpha - 1) * max(log_size - log10(xmin), 0.0) - 0.1


def seen_points(sample: Sample, plane: Plane, xmin: float | None = None) -> NDArray[np.int64]:
    """Indices of the sizes whose dots are drawn: at most one in a square of 0.6 pixels, xmin and the largest always.

    The share falls as the size grows, so that there are never more than about (width + height) / 0.6.
    """
    sizes = sample.sizes
    first = int(np.searchsorted(sizes, 10.0**plane.left if plane.left > -_LAST_LOG else 0.0, "right"))
    if first >= sizes.size:
        return np.zeros(0, np.int64)
    share = shares(sample)[first:]
    across, down = plane.x(np.log10(sizes[first:])) // _CELL, plane.y(np.log10(share)) // _CELL
    new = np.ones(share.size, bool)
    new[1:-1] = (np.diff(across) != 0)[:-1] | (np.diff(down) != 0)[:-1]
    if xmin is not None:
        new |= sizes[first:] == xmin
    return first + np.flatnonzero(new)


def shares(sample: Sample) -> Floats:
    """Share of events at or above each size, float64 (k,)."""
    above: Floats = sample.counts[::-1].cumsum()[::-1] / max(sample.n, 1)
    return above


def share_ticks(plane: Plane) -> list[Tick]:
    """'all', '1 in 10', '1 in 100' and so on."""
    return [Tick(-k, "all" if k == 0 else f"1 in {_whole(k)}") for k in range(floor(-plane.bottom) + 1)]


def _whole(power: int) -> str:
    return count_text(10**power) if power < 7 else f"1e{power}"


def size_ticks(plane: Plane) -> list[Tick]:
    """Powers of ten, fewer where there are many; where there are few, 2 and 5 times them, or equal steps of size."""
    powers = range(floor(plane.left), ceil(plane.right) + 1)
    found: list[Tick] = []
    for steps in _STEPS:
        found = [Tick(k + log10(step), _size(step, k)) for k in powers for step in steps]
        found = [tick for tick in found if plane.holds(tick.place)]
        if len(found) >= 3:
            break
    else:
        return _equal_steps(plane)
    every = ceil(len(found) / _MOST_TICKS)
    return found if every == 1 else [tick for tick in found if round(tick.place) % every == 0]


def _equal_steps(plane: Plane) -> list[Tick]:
    """Multiples of 1, 2 or 5 times a power of ten, four to ten of them."""
    low, high = 10.0**plane.left, 10.0**plane.right
    power = floor(log10((high - low) / 4))
    step = max(s for s in (1, 2, 5) if s * 10.0**power <= (high - low) / 4)
    numbers = range(ceil(low / 10.0**power / step), floor(high / 10.0**power / step) + 1)
    return [Tick(log10(k * step) + power, at_place(k * step * 10.0**power, power)) for k in numbers]


def _size(step: float, power: int) -> str:
    return at_place(step * 10.0**power, min(power, 0)) if -5 < power < 7 else f"{step:g}e{power}"


def minor_ticks(plane: Plane) -> list[float]:
    """Places of 2 to 9 times each power of ten, where there are enough and not too many of them to help the eye."""
    if not _NARROW <= plane.right - plane.left <= 8:
        return []
    powers: Sequence[int] = range(floor(plane.left), ceil(plane.right) + 1)
    places = [k + log10(step) for k in powers for step in range(2, 10)]
    return [place for place in places if plane.holds(place)]
