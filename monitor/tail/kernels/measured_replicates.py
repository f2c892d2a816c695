"""Replicates of a sample of measured sizes, each fitted anew.

A replicate's event lies in the tail with the data's share and then follows the fitted law; else it is drawn
from the events below xmin (Clauset, Shalizi & Newman 2009, section 4.1). The tail comes out sorted without
sorting, by Renyi's representation: the gaps of n ordered exponentials are independent exponentials of means
1/n, 1/(n-1), ..., 1 (A. Renyi, Acta Mathematica Hungarica 4 (1953) 191).

In decision mode only "is the smallest distance at least the observed one?" is asked: the tail is drawn and
searched first, and the first nearer candidate ends the replicate. Candidates, least tail and the code of a
distance are those of the full scan, so the answer is the same.
"""

from __future__ import annotations

import numpy as np

from monitor.tail.kernels.chance import binomial, exponential_draw, resampled, start
from monitor.tail.kernels.compiling import kernel
from monitor.tail.kernels.ladder import distance_of, last_candidate, new_scratch
from monitor.tail.kernels.measured import Ladder, deviations, nearest
from monitor.tail.kernels.replicating import keep_nothing


@kernel
def _draw_tail(rows, base, tail, recipe, state):
    """Fill rows base.. with `tail` ordered draws above xmin; row base - 1 becomes xmin itself, holding no event."""
    y, events, spread = rows
    scale = 1.0 / recipe.rate
    here = recipe.start
    y[base - 1] = here
    for r in range(tail):
        gap = exponential_draw(state) * scale
        spread[base + r] = gap
        here += gap / (tail - r)
        y[base + r] = here
        events[base + r] = tail - r
    events[base + tail] = 0.0
    # The part of the spread that the r-th ordered draw adds is its gap times those above it: the draw itself.
    total = 0.0
    for r in range(tail - 1, -1, -1):
        gap = spread[base + r]
        spread[base + r] = total
        total += gap
    spread[base - 1] = total
    events[base - 1] = tail


@kernel
def _draw_body(rows, base, tail, counts, body, origin):
    """Put the body's rows that were drawn below the tail, from above; returns the first row filled."""
    y, events, spread = rows
    total = spread[base] if tail > 0 else 0.0
    above = y[base] if tail > 0 else 0.0
    held = np.float64(tail)
    at = base
    for i in range(counts.size - 1, -1, -1):
        here = body.place[i]
        total += held * (above - here)
        held += counts[i]
        above = here
        y[at - 1] = here
        events[at - 1] = held
        spread[at - 1] = total
        origin[at - 1] = i
        if counts[i] > 0:
            at -= 1
    return at


@kernel
def _part(rows, begin, end):
    """The ladder of rows begin..end-1."""
    return Ladder(rows[0][begin:end], rows[1][begin : end + 1], rows[2][begin:end])


@kernel
def _keep(kept, r, ladder, row, distance, origin):
    kept.distance[r] = distance
    kept.rate[r] = ladder.events[row] / ladder.spread[row]
    kept.place[r] = ladder.y[row]
    kept.row[r] = origin
    kept.events[r] = ladder.events[row]


@kernel
def _anchored(rows, begin, end, place):
    """Put a given xmin, holding no event, below the first row at or above it; returns the row it is in."""
    y, events, spread = rows
    row = begin
    while row < end and y[row] < place:
        row += 1
    above = y[row] - place if row < end else 0.0
    spread[row - 1] = (spread[row] if row < end else 0.0) + events[row] * above
    events[row - 1] = events[row]
    y[row - 1] = place
    return row - 1


@kernel
def _at_given(rows, anchor, end, recipe, kept, r, scratch):
    """The tail at a given xmin, nothing else."""
    ladder = _part(rows, anchor, end)
    if ladder.events[0] < max(recipe.least, 2) or ladder.spread[0] <= 0.0:
        keep_nothing(kept, r)
    else:
        scratch.probes[:] = -1
        distance = distance_of(deviations(ladder, 0, np.inf, scratch))
        _keep(kept, r, ladder, 0, distance, -1)
    if recipe.decide:
        kept.distance[r] = 1.0 if kept.distance[r] >= recipe.reach else 0.0


@kernel
def replicates(recipe, body, key, first, kept):
    """Make and fit the replicates with numbers first, first + 1, ..., as many as `kept` has room for."""
    size = body.counts.size
    base = size + 1
    counts = np.zeros(size, np.int64)
    origin = np.full(base + 1, -1, np.int64)
    room = base + (recipe.n if recipe.share > 0.0 else 0) + 2
    rows = (np.empty(room), np.empty(room), np.empty(room))
    state = np.empty(4, np.uint64)
    scratch = new_scratch(room)
    for r in range(kept.distance.size):
        start(state, key, first + r)
        tail = binomial(state, recipe.n, recipe.share)
        _draw_tail(rows, base, tail, recipe, state)
        if recipe.given:
            anchor = base - 1
            if recipe.share == 0.0:
                resampled(state, recipe.n, body.counts, body.owner, counts)
                begin = _draw_body(rows, base, 0, counts, body, origin)
                anchor = _anchored(rows, begin, base, recipe.start)
            _at_given(rows, anchor, base + tail, recipe, kept, r, scratch)
            continue
        if recipe.decide:
            ladder = _part(rows, base, base + tail)
            last = last_candidate(ladder.events, recipe.least)
            if nearest(ladder, last, recipe.reach, 0, True, scratch).row >= 0:
                kept.distance[r] = 0.0
                continue
        resampled(state, recipe.n - tail, body.counts, body.owner, counts)
        begin = _draw_body(rows, base, tail, counts, body, origin)
        ladder = _part(rows, begin, base + tail)
        last = last_candidate(ladder.events, recipe.least)
        if recipe.decide:
            last = min(last, base - begin - 1)
            hit = nearest(ladder, last, recipe.reach, last, True, scratch)
            kept.distance[r] = 0.0 if hit.row >= 0 else 1.0
            continue
        best = nearest(ladder, last, np.inf, min(base - begin, last), False, scratch)
        if best.row < 0:
            keep_nothing(kept, r)
        else:
            source = origin[begin + best.row] if begin + best.row < base else -1
            _keep(kept, r, ladder, best.row, best.distance, source)
