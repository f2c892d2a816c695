"""What the three laws share: from a sample to a ladder, from a row of it to a fit, from a fit to replicates."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable
from dataclasses import dataclass
from math import sqrt
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from monitor.tail.judgement import NearMinimum, Options
from monitor.tail.kernels.ladder import Ladder, last_candidate, new_scratch
from monitor.tail.kernels.replicates import replicates
from monitor.tail.kernels.replicating import Body, Kept, Recipe, Sources, Space, Steps, new_kept, new_space
from monitor.tail.kernels.scanning import distance_at, near, nearest, rate_of
from monitor.tail.kernels.splitting import NO_TREE, tree_of
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import NoTail, TailFit
from monitor.tail.wording import are, counted, grouped
from storage.grid import cell_of

Floats = NDArray[np.float64]
Source = Literal["model", "data"]

CLOSENESS = 1.05
"""Candidates whose distance is at most this many times the smallest are reported as equally good."""

HAIR = 1e-12
"""The observed distance less this share counts as far, so that exact ties (whole sizes, grids) count in both modes."""

# From here on one binomial a row is cheaper than one pick an event.
_EVENTS_A_ROW = 24

NOTHING: Floats = np.zeros(0)


@dataclass(frozen=True, slots=True, kw_only=True)
class Chunk:
    """A run of replicates. In decision mode only `distance` says something (1 at least as far, 0 not).

    distance, alpha, xmin  float64 (r,);  n_tail  int64 (r,)
    """

    distance: Floats
    alpha: Floats
    xmin: Floats
    n_tail: NDArray[np.int64]


Replicate = Callable[[int, int, bool], Chunk]
"""(number of the first replicate, how many, decide only) -> Chunk; safe to call from several threads."""


@dataclass(frozen=True, slots=True)
class Rungs:
    """A ladder; `first` int64 (K,) the index of each row's smallest size in the sample, None where row and index are
    the same; `sizes` float64 (K,) that size as people are told it."""

    ladder: Ladder
    first: NDArray[np.int64] | None
    sizes: Floats

    def index_of(self, row: int) -> int:
        """Index in the sample of the smallest size in a row."""
        return row if self.first is None else int(self.first[row])

    def row_of(self, index: int) -> int:
        """The row that begins with the size of this index."""
        return index if self.first is None else int(np.searchsorted(self.first, index))


class Law(ABC):
    """A sample made ready to be scanned under one law. The subclasses know the law, this class the method."""

    def __init__(self, sample: Sample, options: Options) -> None:
        self.sample = sample
        self.options = options
        self.rungs = self.climb(0, None)

    @abstractmethod
    def climb(self, start: int, xmin: float | None) -> Rungs:
        """Rows of the sizes from index `start` on; with `xmin`, the lowest row is there, if need be without events."""

    @abstractmethod
    def given(self, xmin: float) -> tuple[int, float]:
        """For a given xmin: the index of the first size in the tail, and xmin as this law takes it."""

    @abstractmethod
    def sizes_at(self, places: Floats) -> Floats:
        """The sizes that places of the ladder stand for."""

    @abstractmethod
    def standard_error(self, alpha: float, ladder: Ladder, row: int) -> float:
        """Standard error of the exponent fitted at a row."""

    @abstractmethod
    def log_likelihood(self, ladder: Ladder, row: int) -> Callable[[float], float]:
        """Log-likelihood of the exponent at a row, up to a constant."""

    @abstractmethod
    def most_rows(self, fit: TailFit, events: int) -> int:
        """Rows that a tail of so many events may fill."""

    def steps(self, fit: TailFit) -> Steps:
        """The fitted law row by row, where draws from it need that."""
        return NO_STEPS

    def cell(self, xmin: float) -> int | None:
        """The cell of the grid that a tail begins with; None for exact sizes."""
        return None if self.sample.cells is None else int(cell_of(np.array([xmin]))[0])

    def body(self, rows: int) -> Body:
        """The lowest rows of the ladder, to be drawn from."""
        ladder = self.rungs.ladder
        return body_of(ladder.place[:rows], -np.diff(ladder.events)[:rows])

    rate_unit = 1.0
    """What a rate of the ladder is multiplied by to give alpha - 1."""

    def fit(self) -> TailFit | NoTail:
        """The tail with the smallest distance, or the one at the given xmin."""
        if self.options.xmin is not None:
            return self._fit_at(self.options.xmin)
        ladder = self.rungs.ladder
        scratch = new_scratch(ladder.place.size)
        last = last_candidate(ladder.events, self.options.min_tail)
        best = nearest(ladder, last, np.inf, -1, False, scratch)
        if best.row < 0:
            return no_candidate(self.sample, self.options)
        as_good = near(ladder, last, CLOSENESS * best.distance, best.row, scratch)
        sizes = self.rungs.sizes
        spread = NearMinimum(
            xmin=(float(sizes[as_good.first]), float(sizes[as_good.last])),
            alpha=(1.0 + self.rate_unit * as_good.least, 1.0 + self.rate_unit * as_good.most),
        )
        return self._told(self.rungs, int(best.row), self.rungs.index_of(int(best.row)), best.distance, near=spread)

    def _fit_at(self, xmin: float) -> TailFit | NoTail:
        start, taken = self.given(xmin)
        n_tail = int(self.sample.counts[start:].sum())
        if n_tail < self.options.min_tail:
            return too_few(n_tail, self.options.min_tail, xmin)
        rungs = self.climb(start, taken)
        if rungs.ladder.place.size < 2 or rungs.ladder.spread[0] <= 0.0:
            return NO_SPREAD
        return self._told(
            rungs, 0, start, distance_at(rungs.ladder, 0, new_scratch(rungs.ladder.place.size)), near=None
        )

    def _told(self, rungs: Rungs, row: int, start: int, distance: float, *, near: NearMinimum | None) -> TailFit:
        alpha = 1.0 + self.rate_unit * float(rate_of(rungs.ladder, row))
        return TailFit(
            alpha=alpha,
            alpha_se=self.standard_error(alpha, rungs.ladder, row),
            xmin=float(rungs.sizes[row]),
            start=start,
            n_tail=int(rungs.ladder.events[row]),
            n=int(self.rungs.ladder.events[0]),
            ks_distance=float(distance),
            counting=self.options.counting,
            start_cell=self.cell(float(rungs.sizes[row])),
            chosen=near is not None,
            near_minimum=near,
        )

    def _tail_at(self, fit: TailFit) -> tuple[Rungs, int]:
        """The ladder that a fit is a row of, and the row."""
        if fit.chosen:
            return self.rungs, self.rungs.row_of(fit.start)
        return self.climb(*self.given(fit.xmin)), 0

    def profile(self, fit: TailFit) -> Callable[[float], float]:
        """Log-likelihood of the tail at fit.xmin as a function of alpha, up to a constant."""
        rungs, row = self._tail_at(fit)
        return self.log_likelihood(rungs.ladder, row)

    def replicate(self, fit: TailFit, source: Source, key: np.uint64) -> Replicate:
        """How replicates of this fit ('model') or of the data themselves ('data') are made."""
        rungs, row = self._tail_at(fit)
        below = self.rungs.row_of(fit.start) if source == "model" else self.rungs.sizes.size
        body = self.body(below)
        sources = Sources(body, self.steps(fit) if source == "model" else NO_STEPS)
        recipe = self._recipe(fit, source, float(rungs.ladder.place[row]))

        # Spaces go from chunk to chunk: fresh memory for each would cost more than the replicates of large samples.
        spaces: list[Space] = []

        def made(begin: int, count: int, decide: bool) -> Chunk:
            kept = new_kept(count)
            try:
                space = spaces.pop()
            except IndexError:
                space = new_space(recipe, sources)
            replicates(recipe._replace(decide=decide), sources, key, begin, space, kept)
            spaces.append(space)
            return Chunk(
                distance=kept.distance,
                alpha=1.0 + self.rate_unit * kept.rate,
                xmin=self._lower_ends(kept) if fit.chosen else np.full(count, fit.xmin),
                n_tail=kept.events.astype(np.int64),
            )

        return made

    def _recipe(self, fit: TailFit, source: Source, start: float) -> Recipe:
        events = min(fit.n, fit.n_tail + int(12.0 * sqrt(fit.n_tail)) + 100)  # 12 standard deviations and more
        return Recipe(
            law=int(self.rungs.ladder.law),
            n=fit.n,
            share=fit.n_tail / fit.n if source == "model" else 0.0,
            rate=(fit.alpha - 1.0) / self.rate_unit,
            start=start,
            rows=self.most_rows(fit, events) if source == "model" else 0,
            least=int(self.options.min_tail),
            reach=fit.ks_distance * (1.0 - HAIR),
            given=not fit.chosen,
            decide=False,
        )

    def _lower_ends(self, kept: Kept) -> Floats:
        """xmin of each replicate: the size itself where it is one of the data's, else from its place."""
        known = kept.row >= 0
        ends = self.sizes_at(np.where(known | np.isnan(kept.place), self.rungs.ladder.place[0], kept.place))
        ends[known] = self.rungs.sizes[kept.row[known]]
        return ends


def body_of(
    place: Floats, counts: Floats, *, beyond: Floats = NOTHING, offset: Floats = NOTHING, variance: Floats = NOTHING
) -> Body:
    """Rows to be drawn from with replacement, with the cheaper way of drawing chosen (see splitting.resampled)."""
    held = counts.astype(np.int64)
    total = int(held.sum())
    tree = NO_TREE
    if held.size and total == held.size:
        owner = np.zeros(1, np.int32)
    elif held.size and total <= _EVENTS_A_ROW * held.size:
        owner = np.repeat(np.arange(held.size, dtype=np.int32), held)
    else:
        owner = np.zeros(0, np.int32)
        tree = tree_of(held.astype(np.float64))
    return Body(np.ascontiguousarray(place), beyond, offset, variance, held, owner, tree)


NO_STEPS = Steps(NOTHING, NO_TREE, 0, NOTHING, NOTHING, NOTHING, NOTHING)

NO_SPREAD = NoTail(reason="the sizes at and above the given xmin are all the same, so that they show no tail")


def too_few(n_tail: int, least: int, xmin: float) -> NoTail:
    """The answer when the tail at a given xmin is too small."""
    whose = f"only {counted(n_tail)} {are(n_tail)}" if n_tail else "no event is"
    return NoTail(
        reason=f"{whose} at or above the given xmin of {xmin:g}, fewer than the {grouped(least)} a tail must hold: "
        "give a smaller xmin, or a smaller least tail"
    )


def no_candidate(sample: Sample, options: Options) -> NoTail:
    """The answer when no size has enough events at or above it."""
    return NoTail(
        reason=f"no size has {counted(options.min_tail)} at or above it and a larger size beyond: "
        f"{counted(sample.n)} of {grouped(sample.sizes.size)} different sizes leave no candidate tail"
    )
