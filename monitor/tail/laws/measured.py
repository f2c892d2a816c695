"""Measured sizes under the continuous power law (Clauset, Shalizi & Newman 2009, section 3.1)."""

from __future__ import annotations

from collections.abc import Callable
from math import log, sqrt

import numpy as np
from numpy.typing import NDArray

from monitor.tail.judgement import NearMinimum, Options
from monitor.tail.kernels.measured import Ladder, build, distance_at, search
from monitor.tail.kernels.measured_replicates import replicates
from monitor.tail.laws.law import (
    CLOSENESS,
    NO_SPREAD,
    Chunk,
    Replicate,
    Source,
    body_of,
    no_candidate,
    recipe_of,
    room_for,
    too_few,
)
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import NoTail, TailFit


class Measured:
    """A sample of measured sizes as a ladder of logarithms."""

    def __init__(self, sample: Sample, options: Options) -> None:
        self._sample = sample
        self._options = options
        self._ladder, self._first = _ladder(sample.sizes, sample.counts)

    def fit(self) -> TailFit | NoTail:
        """The tail with the smallest distance, or the one at the given xmin."""
        if self._options.xmin is not None:
            return self._fit_at(self._options.xmin)
        ladder, first = self._ladder, self._first
        best, near = search(ladder, self._options.min_tail, CLOSENESS)
        if best.row < 0:
            return no_candidate(self._sample, self._options)
        sizes = self._sample.sizes
        return self._told(
            rate=float(ladder.events[best.row] / ladder.spread[best.row]),
            start=int(first[best.row]),
            n_tail=int(ladder.events[best.row]),
            distance=float(best.distance),
            near=NearMinimum(
                xmin=(float(sizes[first[near.first]]), float(sizes[first[near.last]])),
                alpha=(1.0 + float(near.least), 1.0 + float(near.most)),
            ),
        )

    def _fit_at(self, xmin: float) -> TailFit | NoTail:
        start = int(np.searchsorted(self._sample.sizes, xmin))
        n_tail = int(self._sample.counts[start:].sum())
        if n_tail < self._options.min_tail:
            return too_few(n_tail, self._options.min_tail, xmin)
        # xmin itself becomes the lowest row, holding no event when no size equals it.
        sizes = np.concatenate(([xmin], self._sample.sizes[start:]))
        counts = np.concatenate(([0], self._sample.counts[start:]))
        ladder, _ = _ladder(sizes, counts)
        if ladder.y.size < 2:
            return NO_SPREAD
        rate = float(ladder.events[0] / ladder.spread[0])
        return self._told(rate=rate, start=start, n_tail=n_tail, distance=float(distance_at(ladder, 0)), near=None)

    def _told(self, *, rate: float, start: int, n_tail: int, distance: float, near: NearMinimum | None) -> TailFit:
        given = self._options.xmin
        return TailFit(
            alpha=1.0 + rate,
            alpha_se=rate / sqrt(n_tail),
            xmin=float(self._sample.sizes[start]) if given is None else given,
            start=start,
            n_tail=n_tail,
            n=self._sample.n,
            ks_distance=distance,
            counting="measured",
            chosen=given is None,
            near_minimum=near,
        )

    def replicate(self, fit: TailFit, source: Source, key: np.uint64) -> Replicate:
        """How replicates of this fit (or of the data themselves) are made."""
        ladder, first = self._ladder, self._first
        below = int(np.searchsorted(first, fit.start)) if source == "model" else ladder.y.size
        counts = (ladder.events[:-1] - ladder.events[1:]).astype(np.int64)
        body = body_of(ladder.y[:below], counts[:below])
        sizes = self._sample.sizes[first[:below]]
        start = log(fit.xmin)

        def made(begin: int, count: int, decide: bool) -> Chunk:
            recipe = recipe_of(fit, source, start=start, least=self._options.min_tail, decide=decide)
            kept = room_for(count)
            replicates(recipe, body, key, begin, kept)
            return Chunk(
                distance=kept.distance,
                alpha=1.0 + kept.rate,
                xmin=_in_units(kept.place, kept.row, sizes) if fit.chosen else np.full(count, fit.xmin),
                n_tail=kept.events.astype(np.int64),
            )

        return made

    def profile(self, fit: TailFit) -> Callable[[float], float]:
        """Log-likelihood of the tail at fit.xmin as a function of alpha, up to a constant."""
        n, mean = fit.n_tail, 1.0 / (fit.alpha - 1.0)
        return lambda alpha: n * (log(alpha - 1.0) - (alpha - 1.0) * mean)


def _ladder(sizes: NDArray[np.float64], counts: NDArray[np.int64]) -> tuple[Ladder, NDArray[np.int64]]:
    """The rows of a scan, and the index of each row's smallest size."""
    k = sizes.size
    y, first, events, spread = np.empty(k), np.empty(k, np.int64), np.empty(k + 1), np.empty(k)
    rows = build(sizes, counts, y, first, events, spread)
    return Ladder(y[:rows], events[: rows + 1], spread[:rows]), first[:rows]


def _in_units(place: NDArray[np.float64], row: NDArray[np.int64], sizes: NDArray[np.float64]) -> NDArray[np.float64]:
    """Lower ends of replicate tails: the size itself where it is one of the data's, else exp of its logarithm."""
    if sizes.size == 0:
        return np.exp(place)
    return np.where(row >= 0, sizes[np.maximum(row, 0)], np.exp(place))
