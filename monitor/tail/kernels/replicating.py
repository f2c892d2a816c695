"""Where replicates come from and what is kept of them."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from monitor.tail.kernels.ladder import WHOLE, Ladder, Scratch, new_scratch


class Body(NamedTuple):
    """Rows that replicates draw from as they are, with replacement: those below xmin, or all.

    place, beyond     float64 (b,)  as in a Ladder; beyond only for whole sizes, else empty
    offset, variance  float64 (b,)  whole sizes: mean of ln(size/place) in the row, and its variance; else empty
    counts            int64 (b,)    events in each row
    owner             int32         (events,) row of each event where picks are made one by one, of length 1 where each
                                    row holds one event, else empty: then the draws are split by the tree
    tree              float64       see splitting.tree_of; empty where picks are made one by one
    """

    place: Any
    beyond: Any
    offset: Any
    variance: Any
    counts: Any
    owner: Any
    tree: Any


class Steps(NamedTuple):
    """The fitted law, row by row from xmin on; all empty for measured sizes that are not on the grid.

    survival  float64 (k,)  exact whole sizes: P(X >= xmin + i)
    tree      float64 (m,)  on the grid: splits the tail among its cells (splitting.tree_of); measured sizes: among the
                            first `cells` and all further ones together
    cells     cells that the tree leads to
    place, beyond, offset, variance  float64 (cells,)  whole sizes on the grid: as in Body
    """

    survival: Any
    tree: Any
    cells: int
    place: Any
    beyond: Any
    offset: Any
    variance: Any


class Recipe(NamedTuple):
    """How replicates are made and judged.

    law      MEASURED, WHOLE or BINNED
    n        events in a replicate
    share    chance that an event belongs to the tail; 0: every event is drawn from the body
    rate     exponent less one of the tail's law (BINNED: per cell)
    start    xmin as a place of the ladder
    rows     rows that a tail may need at most
    least    events a candidate must hold
    reach    distance that counts as far: the observed one, less a hair
    given    xmin is given: nothing but the tail at xmin is a candidate
    decide   answer only whether the replicate is at least as far (1) or not (0)
    """

    law: int
    n: int
    share: float
    rate: float
    start: float
    rows: int
    least: int
    reach: float
    given: bool
    decide: bool


class Kept(NamedTuple):
    """What is kept of each replicate; all arrays of the same length.

    distance  float64  smallest distance, infinite without candidates; in decision mode 1 or 0
    rate      float64  fitted exponent less one (BINNED: per cell)
    place     float64  xmin as a place of the ladder
    row       int64    row of the body that xmin is in, -1 when it is in the tail
    events    float64  events in the tail
    """

    distance: Any
    rate: Any
    place: Any
    row: Any
    events: Any


class Sources(NamedTuple):
    """What replicates are drawn from: the data's rows and the fitted law's steps."""

    body: Body
    steps: Steps


class Space(NamedTuple):
    """Space that replicates are made in; each thread has its own.

    rows         Ladder of (body + recipe.rows + 3) empty rows; the tail begins at row body + 1
    counts       int64 (body,)      events drawn in each row of the body
    held, noise  float64        nodes of the larger tree; see splitting.split
    origin       int64 (body + 2,)  the body's row that each row below the tail came from
    state        uint64 (4,)        the generator
    scratch      Scratch of the scan;  law_scratch  Scratch of the fitted law
    """

    rows: Ladder
    counts: Any
    held: Any
    noise: Any
    origin: Any
    state: Any
    scratch: Scratch
    law_scratch: Scratch


def new_space(recipe: Recipe, sources: Sources) -> Space:
    """Space for replicates of `recipe`."""
    size = sources.body.counts.size
    nodes = max(sources.body.tree.size, sources.steps.tree.size, 1)
    most = size + recipe.rows + 3
    whole = most if recipe.law == WHOLE else 0
    rows = Ladder(recipe.law, np.empty(most), np.empty(whole), np.empty(most + 1), np.empty(most), np.empty(whole))
    return Space(
        rows=rows,
        counts=np.zeros(size, np.int64),
        held=np.zeros(2 * nodes),
        noise=np.zeros(nodes),
        origin=np.full(size + 2, -1, np.int64),
        state=np.empty(4, np.uint64),
        scratch=new_scratch(most),
        law_scratch=new_scratch(1),
    )


def new_kept(count: int) -> Kept:
    """Room for `count` replicates."""
    return Kept(
        distance=np.empty(count),
        rate=np.full(count, np.nan),
        place=np.full(count, np.nan),
        row=np.full(count, -1, np.int64),
        events=np.zeros(count),
    )
