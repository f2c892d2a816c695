"""Warnings about the shape of the data, in plain words with numbers: caps, coarse rounding, infinite moments.

Each warning about the data comes from a test against a smooth tail with a false-alarm chance below one in a million
(pile-up) or a thousand million (rounding): a genuine power law, recorded finely or in whole units, stays silent.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import exp, floor, log, log1p, log10

import numpy as np
from numpy.typing import NDArray
from scipy.special import betainc, pdtrc

from monitor.tail.judgement import Interval
from monitor.tail.sample import Sample
from monitor.tail.wording import counted, grouped
from storage.grid import CELL_WIDTH

_PILE_ODDS = 1e-6
_ROUND_ODDS = 1e-9
_LEAST_PILE = 5
_COARSE = 0.02
"""A step of recording below this share of xmin shifts no result that anybody reads."""
_TOP_SIZES = 200
_MOST_DIGITS = 6
_FAR = 8
_STEPS = (5, 10, 12, 15, 20, 24, 25, 30, 50, 60, 100, 250, 500, 1000)
"""Steps, in units of recording, that people round to: fives and tens, dozens, parts of an hour and of a day."""


def shape_warnings(sample: Sample, xmin: float) -> tuple[str, ...]:
    """What looks wrong with the sizes at and above xmin, one sentence each; empty for a clean tail.

    A pile-up at the largest size tells of a cap (a time-out, a policy limit), and the law then fits nothing beyond
    it; sizes rounded to a step that is coarse beside xmin make p and the choice of xmin soft.
    """
    found = (_pile_up(sample, xmin), _rounding(sample, xmin))
    return tuple(sentence for sentence in found if sentence is not None)


def moment_warnings(alpha: float, alpha_interval: Interval | None = None) -> tuple[str, ...]:
    """What the exponent says about averages and standard deviations, one sentence each; empty where both settle."""
    low, high = (None, None) if alpha_interval is None else alpha_interval
    reaches = f"alpha {alpha:.3g}" if low is None or high is None else f"alpha {alpha:.3g} ({low:.3g} to {high:.3g})"
    surely_at_most_2 = high is not None and high <= 2
    if surely_at_most_2:
        return (f"{reaches}: the mean of this tail is infinite, an average of its sizes never settles",)
    if alpha <= 2 or (low is not None and low <= 2):
        return (f"{reaches}: the mean of this tail may be infinite, do not plan on an average of its sizes",)
    if high is not None and high <= 3:
        return (f"{reaches}: the variance of this tail is infinite, a standard deviation of its sizes never settles",)
    if alpha <= 3 or (low is not None and low <= 3):
        return (f"{reaches}: the variance of this tail may be infinite, do not plan on a standard deviation",)
    return ()


def misfit_warning(n_tail: int, ks_distance: float, p: float, *, rule_out: float = 0.1) -> str | None:
    """How large the misfit is when p rules the power law out, but only because the events are so many.

    None unless p <= rule_out and the distance is below 2 % of the events: such a law can still be good enough to
    plan on.
    """
    if p > rule_out or ks_distance >= 0.02:
        return None
    return (
        f"p is {p:.2g}, but with {counted(n_tail, 'tail event')} even a slight departure shows: the fitted share of "
        f"events above a size is nowhere more than {_percent(ks_distance)} of the tail off"
    )


def _percent(share: float) -> str:
    """Two significant digits, rounded up so that "nowhere more than" holds."""
    percent = 100 * share
    if percent <= 0:
        return "0 %"
    unit = 10.0 ** (floor(log10(percent)) - 1)
    return f"{np.ceil(percent / unit - 1e-9) * unit:.2g} %"


def _tail(sample: Sample, xmin: float) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
    first = int(np.searchsorted(sample.sizes, xmin * (1 - 1e-12)))
    return sample.sizes[first:], sample.counts[first:]


def _pile_up(sample: Sample, xmin: float) -> str | None:
    """More events at the largest size than a falling tail leaves there.

    Of the events at or above the largest size M one is there by definition; each of the other c - 1 had the chance
    q = (1 + step / M)^-slope to lie beyond it, so that a pile of c has odds of (1 - q)^(c - 1) at most. And the pile
    must stand out from the sizes just below: at the end of a smooth tail (shares up to 100 %, say) it does not.
    """
    sizes, counts = _tail(sample, xmin)
    if len(sizes) < 3 or counts[-1] < _LEAST_PILE:
        return None
    pile, top = int(counts[-1]), float(sizes[-1])
    spread = float(np.sum(counts * (np.log(sizes) - log(sizes[0]))))
    if spread <= 0.0:  # sizes that differ in their last digits alone have no slope
        return None
    slope = float(counts.sum()) / spread
    step = float(np.diff(sizes[-_TOP_SIZES:]).min())
    if sample.cells is not None:
        step = max(step, top * float(np.expm1(CELL_WIDTH)))
    beyond = exp(-slope * log1p(step / top))
    odds = (pile - 1) * log1p(-beyond) if beyond < 1 else -np.inf
    below = (sizes >= top / 1.25) & (sizes < top)
    expected = float(counts[below].sum()) * step / (top - top / 1.25)
    expected = max(expected, float(counts[below].max(initial=0)) / 3)
    if odds > log(_PILE_ODDS) or pile < 3 * expected or float(pdtrc(pile - 1, max(expected, 1.0))) > _PILE_ODDS:
        return None
    return (
        f"{grouped(pile)} of {grouped(int(counts.sum()))} tail events have the largest size, {top:.6g}: it looks like "
        "a cap (a time-out or a limit); what would lie beyond it cannot be seen, and levels above it are not to be "
        "trusted"
    )


@dataclass(frozen=True, slots=True)
class _Units:
    """Tail sizes as whole multiples of a decimal unit, int64 (k,), with their counts."""

    multiples: NDArray[np.int64]
    counts: NDArray[np.int64]
    unit: float


def _rounding(sample: Sample, xmin: float) -> str | None:
    """Sizes that are multiples of a step, all of them or far more than chance puts there."""
    if sample.cells is not None:
        return None  # the grid has dropped the digits that would tell
    units = _in_units(*_tail(sample, xmin))
    if units is None:
        return None
    common = int(np.gcd.reduce(units.multiples))
    step = common * units.unit
    # A size recorded to the power of ten below the step is a multiple of the step by chance once in `odds`. A step of 1
    # is no news: it is what 'whole' is for.
    odds = step / 10.0 ** (np.ceil(log10(step) - 1e-9) - 1)
    telling = len(units.multiples) * log(odds) >= log(1 / _ROUND_ODDS)
    if step != 1 and step >= _COARSE * xmin and telling:
        return _rounded_words(f"all {grouped(int(units.counts.sum()))} tail events", step, xmin)
    return _heaped(_Units(units.multiples // common, units.counts, step), xmin)


def _in_units(sizes: NDArray[np.float64], counts: NDArray[np.int64]) -> _Units | None:
    """The coarsest decimal unit 1, 0.1, ... that all sizes are multiples of; None when there is none."""
    for digits in range(_MOST_DIGITS + 1):
        scaled = sizes * 10.0**digits
        if scaled[-1] > 2**53:
            return None
        nearest = np.rint(scaled)
        if np.all(np.abs(scaled - nearest) <= 4e-16 * scaled) and nearest[0] > 0:
            return _Units(nearest.astype(np.int64), counts, 10.0**-digits)
    return None


def _heaped(units: _Units, xmin: float) -> str | None:
    """The coarsest step that most events are multiples of, against the share that a smooth tail puts there.

    Judged above 8 steps, where a falling density gives each residue its share to within a third or so; the odds are
    those of twice that share.
    """
    for step in reversed(_STEPS):
        if step * units.unit < _COARSE * xmin:
            break
        far = units.multiples > _FAR * step
        events = int(units.counts[far].sum())
        hits = int(units.counts[far & (units.multiples % step == 0)].sum())
        if events == 0 or hits < events / 2:
            continue
        distinct = int((far & (units.multiples % step == 0)).sum())
        chance = min(2 / step, 0.4)
        if distinct >= 5 and float(betainc(hits, events - hits + 1, chance)) < _ROUND_ODDS:
            whose = f"{hits / events:.0%} of the {grouped(events)} events above {_FAR * step * units.unit:.6g}"
            return _rounded_words(whose, step * units.unit, xmin)
    return None


def _rounded_words(whose: str, step: float, xmin: float) -> str:
    return (
        f"{whose} are multiples of {step:.6g}, which is {step / xmin:.0%} of xmin: they look rounded; p and xmin are "
        "soft, since many sizes tie"
    )
