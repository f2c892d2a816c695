"""What is drawn over the data: the fitted power law with its band, and every rival tail that was determined."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import log10

import numpy as np
from numpy.typing import NDArray

from monitor.render.tail_plane import Ends
from monitor.tail.band import survival_band
from monitor.tail.judgement import Judgement, Rival
from monitor.tail.rivals import rival_survival
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import Draws
from monitor.tail.tails import Tails

Floats = NDArray[np.float64]

_POINTS = 160
_EXACT_INTEGERS = 2.0**53


@dataclass(frozen=True, slots=True)
class Curve:
    """A tail as powers of ten, float64 (k,) each, ending where it leaves the plane."""

    log_size: Floats
    log_share: Floats

    @property
    def reach(self) -> float:
        """The power of ten of the size where it ends."""
        return float(self.log_size[-1]) if self.log_size.size else -np.inf

    def leaves_right(self, ends: Ends) -> bool:
        """Does it end at the right side, and not at the bottom?"""
        return bool(self.log_size.size and self.log_share[-1] > ends.bottom)


@dataclass(frozen=True, slots=True)
class Area:
    """A band as powers of ten, float64 (k,) each, nowhere below the plane."""

    log_size: Floats
    log_low: Floats
    log_high: Floats


@dataclass(frozen=True, slots=True)
class RivalCurve:
    """A rival and its curve."""

    rival: Rival
    curve: Curve


@dataclass(frozen=True, slots=True)
class Curves:
    """Everything that a judgement with a tail puts over the data."""

    fit: Curve
    band: Area | None
    rivals: tuple[RivalCurve, ...]


def curves_of(sample: Sample, judgement: Judgement, draws: Draws | None, ends: Ends) -> Curves | None:
    """The curves of a judgement from its xmin to the right end; None without a tail."""
    alpha, xmin, n_tail = judgement.alpha, judgement.xmin, judgement.n_tail
    if alpha is None or xmin is None or not n_tail:
        return None
    whole = judgement.counting == "whole"
    sizes = _places(xmin, 10.0**ends.right, whole)
    share = n_tail / judgement.n
    tails = Tails(np.array([alpha]), np.array([xmin]), np.array([share]), judgement.counting)
    band = survival_band(sample, draws, sizes, judgement.counting)
    return Curves(
        fit=_curve(sizes, np.array([tails.at_or_above(size)[0] for size in sizes.tolist()]), ends),
        band=None if band is None else _area(sizes, band.low, band.high, ends),
        rivals=tuple(_rivals(judgement, lambda rival: _rival_share(rival, sizes, judgement, share), sizes, ends)),
    )


def _rival_share(rival: Rival, sizes: Floats, judgement: Judgement, share: float) -> Floats | None:
    assert judgement.xmin is not None
    found = rival_survival(rival, sizes, judgement.xmin, counting=judgement.counting)
    return None if found is None else share * found


def _rivals(
    judgement: Judgement, share: Callable[[Rival], Floats | None], sizes: Floats, ends: Ends
) -> list[RivalCurve]:
    drawn = []
    for rival in judgement.rivals:
        found = share(rival) if is_drawn(rival) else None
        if found is not None:
            drawn.append(RivalCurve(rival, _curve(sizes, found, ends)))
    return drawn


def is_drawn(rival: Rival) -> bool:
    """Was the rival determined, and is it another curve than the power law? A cut-off that does not show is not."""
    if rival.log_likelihood_ratio is None or not rival.parameters:
        return False
    return rival.tail != "power law with cut-off" or "cutoff" in rival.parameters


def _places(xmin: float, right: float, whole: bool) -> Floats:
    """Sizes from xmin to the right end, evenly on the logarithmic axis.

    Whole ones while doubles hold them; the last is then the first integer at or beyond the right end.
    """
    sizes = np.append(xmin, 10.0 ** np.linspace(log10(xmin), log10(max(right, xmin)), _POINTS)[1:])
    if whole:
        sizes = np.unique(np.where(sizes < _EXACT_INTEGERS, np.ceil(sizes), sizes))
    return sizes


def _cut_right(x: Floats, y: Floats, right: float) -> Curve:
    """End the last stretch at the right end."""
    if x.size < 2 or x[-1] <= right or x[-2] >= right:
        return Curve(x, y)
    return Curve(np.append(x[:-1], right), np.append(y[:-1], np.interp(right, x[-2:], y[-2:])))


def _logs(shares: Floats, bottom: float) -> Floats:
    """Powers of ten; what is far below the plane, or nothing at all, lies a decade below it."""
    out: Floats = np.log10(np.maximum(shares, 10.0 ** max(bottom - 1, -300.0)))
    return out


def _curve(sizes: Floats, shares: Floats, ends: Ends) -> Curve:
    """The curve down to the bottom: the stretch that crosses it ends on it."""
    x, y = np.log10(sizes), np.log10(np.maximum(shares, 1e-300))
    below = np.flatnonzero(y < ends.bottom)
    if not below.size:
        return _cut_right(x, y, ends.right)
    first = int(below[0])
    if first == 0:
        return Curve(x[:0], y[:0])
    part = (ends.bottom - y[first - 1]) / (y[first] - y[first - 1])
    crossing = x[first - 1] + part * (x[first] - x[first - 1])
    return Curve(np.append(x[:first], min(crossing, ends.right)), np.append(y[:first], ends.bottom))


def _area(sizes: Floats, low: Floats, high: Floats, ends: Ends) -> Area | None:
    known = ~(np.isnan(low) | np.isnan(high))
    if known.sum() < 2:
        return None
    x, bottom = np.log10(sizes[known]), ends.bottom
    lower = _cut_right(x, _logs(low[known], bottom), ends.right)
    upper = _cut_right(x, _logs(high[known], bottom), ends.right)
    inside = upper.log_share >= bottom
    if inside.sum() < 2:
        return None
    return Area(upper.log_size[inside], np.maximum(lower.log_share[inside], bottom), upper.log_share[inside])
