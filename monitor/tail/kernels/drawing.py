"""One replicate's rows: the tail from the fitted law, sorted without sorting, and the body from the data.

Sorted draws come from Renyi's representation: the gaps of n ordered exponentials are independent exponentials of
means 1/n, 1/(n-1), ..., 1 (A. Renyi, Acta Mathematica Hungarica 4 (1953) 191). ln(size/xmin) of a measured tail is
exponential; a whole size is the largest v with P(X >= v) >= exp(-E), E exponential; a cell of the grid is the floor of
an exponential. Where cells hold many events each, the tail is split among them (splitting.py).
"""

from __future__ import annotations

from typing import Any

import numpy as np

from monitor.tail.kernels.arithmetic import exp_nonpositive, exponential, log_ratio, logarithm
from monitor.tail.kernels.chance import exponential_draw
from monitor.tail.kernels.compiling import helper, inner, int64, kernel
from monitor.tail.kernels.ladder import MEASURED, WHOLE, Ladder
from monitor.tail.kernels.splitting import split
from monitor.tail.kernels.whole import survival

_LARGEST_EXACT = 4503599627370496.0  # 2^52: beyond, neighbouring whole numbers need not be told apart
_LARGEST = 1e300


@helper
def gap(law: Any, above: float, here: float) -> Any:
    """How far one place lies above another, in the unit of the spread."""
    return log_ratio(above, here) if law == WHOLE else above - here


@inner
def part(rows: Any, begin: int, end: int) -> Any:
    """Rows begin..end-1 as a ladder of their own."""
    whole = rows.law == WHOLE
    return Ladder(
        rows.law,
        rows.place[begin:end],
        rows.beyond[begin:end] if whole else rows.beyond[:0],
        rows.events[begin : end + 1],
        rows.spread[begin:end],
        rows.within[begin:end] if whole else rows.within[:0],
    )


@kernel
def settle(rows: Any, begin: int, end: int) -> None:
    """Turn the events of rows begin..end-1 into events at or above, and fill their spread.

    On entry events[i] holds the row's own count, spread[i] (whole sizes: and within[i]) what the row itself adds.
    """
    total = 0.0
    held = 0.0
    inside = 0.0
    above = rows.place[end - 1] if end > begin else 0.0
    rows.events[end] = 0.0
    for i in range(end - 1, begin - 1, -1):
        total += held * gap(rows.law, above, rows.place[i]) + rows.spread[i]
        held += rows.events[i]
        above = rows.place[i]
        rows.events[i] = held
        rows.spread[i] = total
        if rows.law == WHOLE:
            inside += rows.within[i]
            rows.within[i] = inside


@inner
def _measured_tail(rows: Any, base: int, tail: int, recipe: Any, state: Any) -> Any:
    """`tail` ordered draws above xmin in rows base.. ; returns the row after the last."""
    y = rows.place
    events = rows.events
    spread = rows.spread
    scale = 1.0 / recipe.rate
    here = recipe.start
    for r in range(tail):
        step = exponential_draw(state) * scale
        spread[base + r] = step
        here += step / (tail - r)
        y[base + r] = here
        events[base + r] = tail - r
    events[base + tail] = 0.0
    # Each step, before it was divided among the draws above it, is what these add to the spread together.
    total = 0.0
    for r in range(tail - 1, -1, -1):
        step = spread[base + r]
        spread[base + r] = total
        total += step
    return base + tail


@helper
def _put(rows: Any, at: Any, base: int, place: float, count: int) -> Any:
    """Add `count` events at `place` to the row last filled or to a new one; returns the row after it."""
    if at > base and rows.place[at - 1] == place:
        rows.events[at - 1] += count
        return at
    rows.place[at] = place
    rows.events[at] = count
    rows.spread[at] = 0.0
    return at + 1


@inner
def _binned_tail(rows: Any, base: int, tail: int, recipe: Any, steps: Any, space: Any) -> Any:
    """Counts of cells from xmin on, as far as they hold some events each; the rest draw by draw."""
    left = tail
    at = base
    if steps.cells > 0:
        first = steps.tree.size
        split(space.state, tail, steps.tree, space.held, space.noise)
        for k in range(steps.cells):
            count = space.held[first + k]
            rows.place[at] = recipe.start + k
            rows.events[at] = count
            rows.spread[at] = 0.0
            at += int64(count > 0.0)  # a cell without events is overwritten by the next
        left = int64(space.held[first + steps.cells])
    edge = recipe.start + steps.cells
    height = 0.0
    for r in range(left):
        height += exponential_draw(space.state) / (left - r)
        at = _put(rows, at, base, edge + np.floor(height / recipe.rate), int64(1))
    settle(rows, base, at)
    return at


@inner
def _far_whole(law: Any, chance: float, guess: float, scratch: Any) -> Any:
    """The largest v with P(X >= v) >= chance, from a guess that is hardly ever more than one off."""
    v = guess
    if v >= _LARGEST_EXACT:
        return min(v, _LARGEST)
    while survival(law, v + 1.0, scratch) >= chance:
        v += 1.0
    while v > law.start and survival(law, v, scratch) < chance:
        v -= 1.0
    return v


@inner
def _whole_tail(rows: Any, base: int, tail: int, recipe: Any, steps: Any, law: Any, scratch: Any, state: Any) -> Any:
    """`tail` ordered draws from the zeta law, equal ones in one row."""
    table = steps.survival
    edge = recipe.start + table.size - 1.0
    edge_height = -logarithm(table[table.size - 1]) if table[table.size - 1] > 0.0 else np.inf
    height = 0.0
    k = 0
    at = base
    for r in range(tail):
        height += exponential_draw(state) / (tail - r)
        chance = exp_nonpositive(-height)
        if height < edge_height:
            while k + 1 < table.size and table[k + 1] >= chance:
                k += 1
            v = recipe.start + k
        else:
            guess = np.floor(0.5 + (edge - 0.5) * exponential((height - edge_height) / recipe.rate))
            v = _far_whole(law, chance, guess, scratch)
        at = _put(rows, at, base, v, int64(1))
    for i in range(base, at):
        rows.beyond[i] = rows.place[i] + 1.0
        rows.within[i] = 0.0
    settle(rows, base, at)
    return at


@inner
def _whole_cells_tail(rows: Any, base: int, tail: int, steps: Any, space: Any) -> Any:
    """Counts of the grid's cells from xmin on."""
    at = base
    first = steps.tree.size
    split(space.state, tail, steps.tree, space.held, space.noise)
    for k in range(steps.cells):
        count = space.held[first + k]
        if count == 0.0:
            continue
        rows.place[at] = steps.place[k]
        rows.beyond[at] = steps.beyond[k]
        rows.events[at] = count
        rows.spread[at] = count * steps.offset[k]
        rows.within[at] = count * steps.variance[k]
        at += 1
    settle(rows, base, at)
    return at


@inner
def draw_tail(rows: Any, base: int, tail: int, recipe: Any, steps: Any, law: Any, space: Any) -> Any:
    """Fill rows base.. with `tail` draws from the fitted law; returns the row after the last."""
    if tail == 0:
        rows.events[base] = 0.0
        return base
    if recipe.law == MEASURED:
        return _measured_tail(rows, base, tail, recipe, space.state)
    if recipe.law == WHOLE:
        if steps.cells > 0:
            return _whole_cells_tail(rows, base, tail, steps, space)
        return _whole_tail(rows, base, tail, recipe, steps, law, space.law_scratch, space.state)
    return _binned_tail(rows, base, tail, recipe, steps, space)


@inner
def draw_body(rows: Any, base: int, top: int, counts: Any, body: Any, origin: Any) -> Any:
    """Put the body's rows that `counts` hit below the tail (rows base..top-1), walking down; returns the first."""
    whole = rows.law == WHOLE
    filled = top > base
    total = rows.spread[base] if filled else 0.0
    held = rows.events[base] if filled else 0.0
    inside = rows.within[base] if filled and whole else 0.0
    above = rows.place[base] if filled else body.place[body.place.size - 1]
    at = base
    for i in range(counts.size - 1, -1, -1):
        here = body.place[i]
        count = np.float64(counts[i])
        total += held * gap(rows.law, above, here)
        held += count
        above = here
        rows.place[at - 1] = here
        rows.events[at - 1] = held
        if whole:
            total += count * body.offset[i]
            inside += count * body.variance[i]
            rows.beyond[at - 1] = body.beyond[i]
            rows.within[at - 1] = inside
        rows.spread[at - 1] = total
        origin[at - 1] = i
        if count > 0.0:  # a row without events is overwritten by the next
            at -= 1
    return at


@inner
def anchor(rows: Any, begin: int, end: int, place: float) -> Any:
    """Put a given xmin, holding no event, below the first row at or above it; returns the row it is in."""
    row = begin
    while row < end and rows.place[row] < place:
        row += 1
    above = row < end
    held = rows.events[row]
    rows.place[row - 1] = place
    rows.events[row - 1] = held
    rows.spread[row - 1] = rows.spread[row] + held * gap(rows.law, rows.place[row], place) if above else 0.0
    if rows.law == WHOLE:
        rows.beyond[row - 1] = place + 1.0
        rows.within[row - 1] = rows.within[row] if above else 0.0
    return row - 1
