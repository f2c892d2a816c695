"""Replicates of a sample, each fitted anew.

A replicate's event lies in the tail with the data's share and then follows the fitted law; else it is drawn from
the events below xmin (Clauset, Shalizi & Newman 2009, section 4.1). With a share of 0 all events are drawn from
the data: the plain bootstrap.

In decision mode only "is the smallest distance at least the observed one?" is asked: the tail is drawn and
searched first, and the first nearer candidate ends the replicate. Candidates, least tail and the code of a
distance are those of the full scan, so the answer is the same.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from monitor.tail.kernels.chance import binomial, start
from monitor.tail.kernels.compiling import inner, int64, kernel
from monitor.tail.kernels.drawing import anchor, draw_body, draw_tail, part
from monitor.tail.kernels.ladder import WHOLE, Ladder, Scratch, last_candidate
from monitor.tail.kernels.scanning import distance_at, nearest, rate_of
from monitor.tail.kernels.splitting import resampled
from monitor.tail.kernels.whole import prepared


@inner
def _keep_nothing(kept: Any, r: int) -> None:
    """A replicate without candidates is infinitely far."""
    kept.distance[r] = np.inf
    kept.rate[r] = np.nan
    kept.place[r] = np.nan
    kept.row[r] = -1
    kept.events[r] = 0.0


@inner
def _keep(kept: Any, r: int, ladder: Ladder, row: int, distance: float, origin: Any) -> None:
    kept.distance[r] = distance
    kept.rate[r] = rate_of(ladder, row)
    kept.place[r] = ladder.place[row]
    kept.row[r] = origin
    kept.events[r] = ladder.events[row]


@inner
def _judge_given(ladder: Ladder, recipe: Any, kept: Any, r: int, scratch: Scratch) -> None:
    """The tail at a given xmin, the ladder's first row; nothing else is a candidate."""
    if ladder.events[0] < max(recipe.least, 2) or ladder.spread[0] <= 0.0:
        _keep_nothing(kept, r)
    else:
        row = int64(0)  # typed, so that no second version is compiled for the constant
        _keep(kept, r, ladder, row, distance_at(ladder, row, scratch), int64(-1))
    if recipe.decide:
        kept.distance[r] = 1.0 if kept.distance[r] >= recipe.reach else 0.0


@kernel
def replicates(recipe: Any, sources: Any, key: Any, first: int, space: Any, kept: Any) -> None:
    """Make and fit the replicates with numbers first, first + 1, ..., as many as `kept` has room for.

    Parameters: recipe (Recipe), sources (Sources), space (Space, of the caller's thread alone), kept (Kept).
    """
    body = sources.body
    rows = space.rows
    scratch = space.scratch
    base = body.counts.size + 1
    whole = recipe.law == WHOLE
    law = prepared(recipe.rate + 1.0 if whole else 2.0, recipe.start if whole else 1.0, space.law_scratch)
    for r in range(kept.distance.size):
        start(space.state, key, first + r)
        tail = binomial(space.state, recipe.n, recipe.share)
        top = draw_tail(rows, base, tail, recipe, sources.steps, law, space)
        begin = base
        if recipe.decide and not recipe.given:
            last = last_candidate(rows.events[base : top + 1], recipe.least)
            if nearest(part(rows, base, top), last, recipe.reach, min(last, 0), recipe.decide, scratch).row >= 0:
                kept.distance[r] = 0.0
                continue
        if recipe.share == 0.0 or not recipe.given:
            resampled(space.state, recipe.n - tail, body, space.held, space.noise, space.counts)
            begin = draw_body(rows, base, top, space.counts, body, space.origin)
        if recipe.given:
            _judge_given(part(rows, anchor(rows, begin, top, recipe.start), top), recipe, kept, r, scratch)
            continue
        ladder = part(rows, begin, top)
        below = base - begin
        last = last_candidate(ladder.events, recipe.least)
        if recipe.decide:
            last = min(last, below - 1)
        hint = min(below, last)
        reach = recipe.reach if recipe.decide else np.inf
        best = nearest(ladder, last, reach, hint, recipe.decide, scratch)
        if recipe.decide:
            kept.distance[r] = 0.0 if best.row >= 0 else 1.0
        elif best.row < 0:
            _keep_nothing(kept, r)
        else:
            source = space.origin[begin + best.row] if best.row < below else int64(-1)
            _keep(kept, r, ladder, best.row, best.distance, source)
