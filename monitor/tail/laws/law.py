"""What a law must be able to do, and what the three of them share."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal, Protocol

import numpy as np
from numpy.typing import NDArray

from monitor.tail.judgement import Options
from monitor.tail.kernels.replicating import Body, Kept, Recipe
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import NoTail, TailFit

Source = Literal["model", "data"]

CLOSENESS = 1.05
"""Candidates whose distance is at most this many times the smallest are reported as equally good."""

# From here on one binomial a row is cheaper than one pick an event.
_EVENTS_A_ROW = 24

# The observed distance less this share counts as far, so that exact ties (whole sizes, grids) count in both modes.
_HAIR = 1e-12


@dataclass(frozen=True, slots=True, kw_only=True)
class Chunk:
    """A run of replicates. In decision mode only `distance` says something (1 at least as far, 0 not).

    distance, alpha, xmin  float64 (r,);  n_tail  int64 (r,)
    """

    distance: NDArray[np.float64]
    alpha: NDArray[np.float64]
    xmin: NDArray[np.float64]
    n_tail: NDArray[np.int64]


Replicate = Callable[[int, int, bool], Chunk]
"""(number of the first replicate, how many, decide only) -> Chunk; safe to call from several threads."""


class Law(Protocol):
    """A sample made ready to be scanned under one law."""

    def fit(self) -> TailFit | NoTail:
        """The tail with the smallest distance, or the one at the given xmin."""

    def replicate(self, fit: TailFit, source: Source, key: np.uint64) -> Replicate:
        """How replicates of this fit (or of the data themselves) are made."""

    def profile(self, fit: TailFit) -> Callable[[float], float]:
        """Log-likelihood of the tail at fit.xmin as a function of alpha, up to a constant."""


def body_of(place: NDArray[np.float64], counts: NDArray[np.int64]) -> Body:
    """The rows that are drawn with replacement, with the cheaper way of drawing chosen."""
    total = int(counts.sum())
    if counts.size and total == counts.size:
        owner = np.zeros(1, np.int32)
    elif counts.size and total <= _EVENTS_A_ROW * counts.size:
        owner = np.repeat(np.arange(counts.size, dtype=np.int32), counts)
    else:
        owner = np.zeros(0, np.int32)
    return Body(np.ascontiguousarray(place, np.float64), np.ascontiguousarray(counts, np.int64), owner)


def recipe_of(fit: TailFit, source: Source, *, start: float, least: int, decide: bool) -> Recipe:
    """The recipe of replicates of `fit`; from 'data' every event is drawn from the rows."""
    return Recipe(
        n=fit.n,
        share=fit.n_tail / fit.n if source == "model" else 0.0,
        rate=fit.alpha - 1.0,
        start=float(start),
        least=int(least),
        reach=fit.ks_distance * (1.0 - _HAIR),
        given=not fit.chosen,
        decide=decide,
    )


def room_for(count: int) -> Kept:
    """Empty arrays for `count` replicates."""
    return Kept(
        np.empty(count), np.full(count, np.nan), np.full(count, np.nan), np.full(count, -1, np.int64), np.zeros(count)
    )


def too_few(n_tail: int, least: int, xmin: float) -> NoTail:
    """The answer when the tail at a given xmin is too small."""
    return NoTail(
        reason=f"only {n_tail} events are at or above the given xmin of {xmin:g}, fewer than the {least} a tail must "
        "hold: give a smaller xmin, or a smaller least tail"
    )


NO_SPREAD = NoTail(reason="the sizes at and above xmin are all the same, so that they show no tail")


def no_candidate(sample: Sample, options: Options) -> NoTail:
    """The answer when no size has enough events at or above it."""
    return NoTail(
        reason=f"no size has {options.min_tail} events at or above it and a larger size beyond: {sample.n} events of "
        f"{sample.sizes.size} different sizes leave no candidate tail"
    )
