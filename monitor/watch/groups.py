"""Groups of exceedances, and how unusual a group is among the ones before it: the ground of the rules fit and rival.

The shape of a tail is judged on disjoint groups of exceedances (500, or about an hour's worth when there are
many), each by two numbers that do not depend on the exponent:
cv       n sum y^2 / (sum y)^2, about 2 for a power law; low for a lognormal, a stretched exponential or a cut-off
longest  max y / mean y, low above all where the largest sizes are cut off
A group is ranked among all earlier groups of the stream and a fixed number of groups drawn from the null law
(keyed, so they need not be stored): p = (U + number more extreme) / j, U uniform by key. While the groups are alike
the p are independent and exactly uniform (ranks of exchangeable values), whether or not the tail is exactly a power
law once the stream's own groups outweigh the drawn ones; a small misfit that was there all along fades instead of
speaking in the end. The drawn groups give the first weeks their power. (Ranks in sequence: V. Vovk, I. Nouretdinov
& A. Gammerman, Testing exchangeability on-line, ICML 2003.)
"""

from __future__ import annotations

from bisect import bisect_left, bisect_right, insort
from functools import lru_cache

import msgspec
import numpy as np
from numpy.typing import NDArray

from monitor.watch.keyed import key_of, uniform, uniforms
from monitor.watch.slots import Yardstick
from storage.grid import CELL_WIDTH

GROUP = 500
DRAWN = 40
"""Groups drawn from the null law that stand in for a past."""

KEPT = 8192
"""Earlier groups that are kept; beyond it no more are added (their ranks change by less than one in a thousand)."""

_GROUPS_A_DAY = 24


class Group(msgspec.Struct, frozen=True):
    """One finished group: its number in the stream, and its two statistics."""

    number: int
    cv: float
    longest: float


class GroupState(msgspec.Struct, frozen=True, kw_only=True):
    """The open group (how many, sums of y and y^2, largest y) and the earlier statistics, ascending."""

    count: int = 0
    total: float = 0.0
    squares: float = 0.0
    largest: float = 0.0
    finished: int = 0
    cvs: tuple[float, ...] = ()
    longests: tuple[float, ...] = ()


class Ranked(msgspec.Struct, frozen=True):
    """Shares of earlier groups beyond a group, uniform while nothing changes.

    cv_low      chance of a cv as low
    longest_low chance of a longest as low
    """

    group: Group
    cv_low: float
    longest_low: float


class GroupStep(msgspec.Struct, frozen=True):
    """The groups finished in the slot with their ranks, and the state after it."""

    ranked: tuple[Ranked, ...]
    state: GroupState


class GroupLaw(msgspec.Struct, frozen=True, kw_only=True):
    """What decides the groups of a stream: its name, their size and the null law they are first compared with.

    width  0 for measured sizes; ln-width of a cell on the grid times (alpha - 1)
    whole  (alpha, xmin) for whole sizes
    """

    stream: str
    size: int = GROUP
    width: float = 0.0
    whole: tuple[float, float] | None = None


def law_for(stream: str, yardstick: Yardstick, alpha: float, exceedances_a_day: float) -> GroupLaw:
    """The groups of a stream: 500 exceedances, more where there would be more than a group an hour."""
    whole = (alpha, yardstick.xmin) if yardstick.counting == "whole" and yardstick.k0 is None else None
    width = 0.0 if yardstick.k0 is None else CELL_WIDTH * (alpha - 1.0)
    return GroupLaw(stream=stream, size=max(GROUP, round(exceedances_a_day / _GROUPS_A_DAY)), width=width, whole=whole)


def step(state: GroupState, y: NDArray[np.float64], law: GroupLaw, hold: bool = False) -> GroupStep:
    """Fold the log sizes of a slot in their order. hold: rank groups, but do not count them among the earlier."""
    ranked = []
    at = 0
    while at < y.size:
        part = y[at : at + law.size - state.count]
        at += part.size
        state = msgspec.structs.replace(
            state,
            count=state.count + int(part.size),
            total=float(np.cumsum(np.concatenate(([state.total], part)))[-1]),
            squares=float(np.cumsum(np.concatenate(([state.squares], part * part)))[-1]),
            largest=max(state.largest, float(part.max())),
        )
        if state.count == law.size:
            found, state = _finished(state, law, hold)
            if found is not None:
                ranked.append(found)
    return GroupStep(tuple(ranked), state)


def _finished(state: GroupState, law: GroupLaw, hold: bool) -> tuple[Ranked | None, GroupState]:
    fresh = GroupState(finished=state.finished + 1, cvs=state.cvs, longests=state.longests)
    if state.total <= 0:
        return None, fresh  # all sizes equal xmin: no shape to judge
    group = Group(
        state.finished,
        law.size * state.squares / (state.total * state.total),
        state.largest * law.size / state.total,
    )
    drawn = drawn_groups(law)
    number = group.number
    ranked = Ranked(
        group,
        _rank(group.cv, drawn.cvs, state.cvs, key_of("rank of cv", law.stream, number)),
        _rank(group.longest, drawn.longests, state.longests, key_of("rank of longest", law.stream, number)),
    )
    if hold or len(state.cvs) >= KEPT:
        return ranked, fresh
    return ranked, msgspec.structs.replace(
        fresh, cvs=_inserted(state.cvs, group.cv), longests=_inserted(state.longests, group.longest)
    )


def _inserted(ascending: tuple[float, ...], value: float) -> tuple[float, ...]:
    more = list(ascending)
    insort(more, value)
    return tuple(more)


def _rank(value: float, drawn: tuple[float, ...], earlier: tuple[float, ...], key: int) -> float:
    """Randomised lower rank: (number below + U (ties + 1)) / (all + 1), exactly uniform for exchangeable values."""
    below = bisect_left(drawn, value) + bisect_left(earlier, value)
    ties = bisect_right(drawn, value) + bisect_right(earlier, value) - below
    rank = (below + uniform(key) * (ties + 1)) / (len(drawn) + len(earlier) + 1)
    return min(rank, 1.0 - 2.0**-53)  # rounding must not make it 1


class Drawn(msgspec.Struct, frozen=True):
    """Statistics of groups from the null law, ascending."""

    cvs: tuple[float, ...]
    longests: tuple[float, ...]


@lru_cache(maxsize=4096)
def drawn_groups(law: GroupLaw, count: int = DRAWN) -> Drawn:
    """Statistics of `count` groups drawn from the null law, the same ones whenever they are asked for."""
    u = uniforms(key_of("drawn groups", law.stream, law.size), 0, count * law.size)
    y = _null_scores(u, law).reshape(count, law.size)
    totals = y.sum(axis=1)
    cvs = law.size * (y * y).sum(axis=1) / totals**2
    longests = y.max(axis=1) * law.size / totals
    return Drawn(tuple(np.sort(cvs).tolist()), tuple(np.sort(longests).tolist()))


def _null_scores(u: NDArray[np.float64], law: GroupLaw) -> NDArray[np.float64]:
    """Log sizes from the null law, up to scale: exponential, geometric on the grid, or from the zeta law."""
    if law.whole is not None:
        alpha, xmin = law.whole
        # Rounding a continuous power law from xmin - 1/2 is CSN's approximate generator (their appendix D); its
        # error in cv is below the sampling error of a group from xmin 5 on.
        sizes = np.floor((xmin - 0.5) * u ** (-1.0 / (alpha - 1.0)) + 0.5)
        return np.log(sizes / (xmin - 0.5))
    exponential = -np.log(u)
    if law.width > 0:
        return np.floor(exponential / law.width) + 0.5
    return exponential
