"""What the replicates of all three laws share: where they come from and what is kept of them."""

from __future__ import annotations

from typing import Any, NamedTuple

from monitor.tail.kernels.compiling import helper


class Body(NamedTuple):
    """The rows below xmin, which replicates draw from as they are, with replacement.

    place   float64 (b,)  ln(size), size or cell of each row, as the law's scan wants it, ascending
    counts  int64 (b,)    events in each row
    owner   int32         row of each event, for picks one by one; see chance.resampled
    """

    place: Any
    counts: Any
    owner: Any


class Recipe(NamedTuple):
    """How replicates are made and judged.

    n        events in a replicate
    share    chance that an event belongs to the tail
    rate     exponent minus one, of the tail's law
    start    xmin, as the law's scan wants it (ln(size), size or cell)
    least    events a candidate must hold
    reach    distance that counts as far: the observed one, less a hair
    given    xmin is given: nothing but the tail at xmin is a candidate
    decide   answer only whether the replicate is at least as far (1) or not (0)
    """

    n: int
    share: float
    rate: float
    start: float
    least: int
    reach: float
    given: bool
    decide: bool


class Kept(NamedTuple):
    """What is kept of each replicate; all arrays of the same length.

    distance  float64  smallest distance, infinite without candidates; in decision mode 1 or 0
    rate      float64  exponent minus one
    place     float64  xmin, as the law's scan wants it
    row       int64    row of the body that xmin is in, -1 when it is in the tail
    events    float64  events in the tail
    """

    distance: Any
    rate: Any
    place: Any
    row: Any
    events: Any


@helper
def keep_nothing(kept, r):
    """A replicate without candidates is infinitely far."""
    kept.distance[r] = float("inf")
    kept.rate[r] = float("nan")
    kept.place[r] = float("nan")
    kept.row[r] = -1
    kept.events[r] = 0.0
