"""The records that the parts of a judgement hand to one another: the fitted tail and its bootstrap draws."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from monitor.tail.judgement import Counting, NearMinimum


@dataclass(frozen=True, slots=True, kw_only=True)
class TailFit:
    """The power law fitted to the sizes at and above xmin.

    alpha         exponent of the density, p(x) ~ x^-alpha; the survival function falls with alpha - 1
    alpha_se      its standard error at this xmin
    xmin          lower end of the tail: one of the sample's sizes, or the given one (on the grid: the lower edge of a
                  cell; of whole sizes there: the first integer in it)
    start         index in the sample's ascending sizes of the first one in the tail
    n_tail        events at or above xmin
    n             all events
    ks_distance   largest distance between the tail's empirical and fitted distribution functions
    counting      'measured' or 'whole'
    start_cell    cell that xmin is the lower edge of, when the sample is on the grid, else None
    chosen        xmin was chosen by the smallest distance; False when it was given
    near_minimum  candidates whose distance is within 5 % of the smallest; None when xmin was given
    """

    alpha: float
    alpha_se: float
    xmin: float
    start: int
    n_tail: int
    n: int
    ks_distance: float
    counting: Counting
    start_cell: int | None = None
    chosen: bool = True
    near_minimum: NearMinimum | None = None

    @property
    def share(self) -> float:
        """Share of all events that lie in the tail."""
        return self.n_tail / self.n


@dataclass(frozen=True, slots=True, kw_only=True)
class NoTail:
    """There is no tail to fit, and why, in words for people."""

    reason: str


@dataclass(frozen=True, slots=True, kw_only=True)
class Draws:
    """Refits of bootstrap replicates, in the order of their numbers.

    alpha   float64 (r,)   exponents
    xmin    float64 (r,)   lower ends, in the unit of the sizes
    n_tail  int64 (r,)     events in the tail, out of n
    n       events in each replicate
    source  'model': replicates of the fitted law above xmin and of the data below (Clauset, Shalizi & Newman,
            section 4.1); 'data': the data drawn with replacement, which assumes no law
    """

    alpha: NDArray[np.float64]
    xmin: NDArray[np.float64]
    n_tail: NDArray[np.int64]
    n: int
    source: Literal["model", "data"] = "model"
