"""Numbers as text: as many digits as their interval allows, thousands set apart by a space."""

from __future__ import annotations

from collections.abc import Sequence
from math import floor, isfinite, log10

Bounds = Sequence[float | None]


def grouped(value: float, decimals: int = 0) -> str:
    """The number with `decimals` decimals and its thousands set apart: 12345.6 -> '12 346'."""
    return f"{value:,.{decimals}f}".replace(",", " ")


def count_text(value: int) -> str:
    """A count, in full."""
    return f"{value:,}".replace(",", " ")


def at_place(value: float, place: int) -> str:
    """The number rounded at 10^place: (9437, 2) -> '9 400', (2.2083, -2) -> '2.21'."""
    if abs(value) >= 1e12 or 0 < abs(value) < 1e-5:
        digits = max(0, floor(log10(abs(value))) - place)
        return f"{value:.{min(digits, 5)}e}".replace("e+", "e").replace("e0", "e")
    if place >= 0:
        return grouped(round(value, -place))
    return grouped(value, min(-place, 12))


def place_of(value: float, interval: Bounds | None) -> int:
    """Where rounding starts: the last place that still says something beside the interval's half-width.

    Half of the narrower side counts, so that at most two uncertain digits are shown; without an interval
    three digits are.
    """
    sides = [abs(value - bound) for bound in interval or () if bound is not None and isfinite(bound)]
    widest = max(sides, default=0.0)
    if widest > 0:
        return max(floor(log10(widest / 3)), floor(log10(abs(value))) - 7 if value else -12)
    return floor(log10(abs(value))) - 2 if value else 0


def estimate(value: float, interval: Bounds | None = None) -> str:
    """An estimate alone, with the digits that its interval allows."""
    return at_place(value, place_of(value, interval))


def bounds_text(value: float, interval: Bounds, *, join: str = " to ") -> str:
    """The interval beside an estimate, with the same digits; an open side is said in words."""
    place = place_of(value, interval)
    low, high = interval
    if low is None and high is None:
        return "no bounds known"
    if high is None:
        return f"{at_place(low, place)} or more" if low is not None else ""
    if low is None:
        return f"up to {at_place(high, place)}"
    return f"{at_place(low, place)}{join}{at_place(high, place)}"


def with_bounds(value: float, interval: Bounds | None, *, join: str = " to ") -> str:
    """'2.21 (2.15 to 2.27)'; the estimate alone when there is no interval."""
    if interval is None:
        return estimate(value)
    return f"{estimate(value, interval)} ({bounds_text(value, interval, join=join)})"


def size_text(value: float) -> str:
    """A size that was read or set, not estimated: in full up to six digits."""
    if value == 0:
        return "0"
    place = floor(log10(abs(value))) - 5
    text = at_place(value, place)
    return text.rstrip("0").rstrip(".") if "." in text and "e" not in text else text


def exact_at(value: float, place: int) -> str:
    """A number that was set, not estimated: with the digits of its neighbours, but never fewer than it has."""
    decimals = len(f"{value:.6f}".rstrip("0").partition(".")[2])
    return at_place(value, min(place, -decimals))


def percent(share: float) -> str:
    """A share in percent, two digits: 0.1234 -> '12 %'."""
    value = 100 * share
    if value == 0 or value >= 99.95:
        return f"{value:.0f} %"
    return f"{at_place(value, min(0, floor(log10(value)) - 1))} %"
