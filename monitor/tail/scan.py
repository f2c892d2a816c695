"""Finding the tail of a sample: the exponent, the lower end with the smallest KS distance, and how sure it is.

Clauset, Shalizi & Newman, SIAM Review 51 (2009) 661-703, sections 3.1-3.3; on the grid Virkar & Clauset, Annals
of Applied Statistics 8 (2014) 89-119.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from monitor.tail.judgement import Options
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import NoTail, TailFit
from monitor.tail.wording import are, counted, grouped

if TYPE_CHECKING:
    from monitor.tail.laws.law import Law

LARGEST_WHOLE = 2.0**53
"""Doubles above this no longer tell neighbouring whole numbers apart."""


def find_tail(sample: Sample, options: Options) -> TailFit | NoTail:
    """Fit the tail of `sample`.

    With options.xmin the tail starts there; else at the candidate with the smallest KS distance. Candidates are
    all distinct sizes (cells on the grid) with at least options.min_tail events at or above and a larger size
    beyond; of equal distances the smallest size wins. Never raises on data: what cannot be fitted is a NoTail.
    """
    refusal = why_no_tail(sample, options)
    if refusal is not None:
        return refusal
    return law_of(sample, options).fit()


def law_of(sample: Sample, options: Options) -> Law:
    """The sample made ready for its law: measured or whole, exact or on the grid."""
    # Here and not above: the compiler takes half a second to load, and most commands never fit anything.
    if options.counting == "whole":
        from monitor.tail.laws.whole import Whole

        return Whole(sample, options)
    if sample.cells is not None:
        from monitor.tail.laws.binned import Binned

        return Binned(sample, options)
    from monitor.tail.laws.measured import Measured

    return Measured(sample, options)


def why_no_tail(sample: Sample, options: Options) -> NoTail | None:
    """The reason why this sample cannot show a tail at all, or None."""
    n, distinct = sample.n, sample.sizes.size
    if n == 0:
        return NoTail(reason="there are no events")
    if not np.isfinite(sample.sizes[-1]) or not sample.sizes[0] > 0.0:  # ascending: the ends tell
        return NoTail(reason=f"a size must be a positive number; the smallest here is {sample.sizes[0]:g}")
    if n < options.min_tail:
        return NoTail(reason=f"{counted(n)} {are(n)} fewer than the {grouped(options.min_tail)} that a tail must hold")
    if distinct == 1:
        whose = f"all {grouped(n)} sizes are" if n > 1 else "the only size is"
        return NoTail(reason=f"{whose} {_size(sample.sizes[0])}: there is no tail to speak of")
    if distinct == 2:
        low, high = sample.sizes
        return NoTail(
            reason=f"the {grouped(n)} sizes take only two values, {_size(low)} and {_size(high)}: a tail needs at "
            "least three"
        )
    if options.counting == "whole":
        return _why_not_whole(sample)
    return None


def _why_not_whole(sample: Sample) -> NoTail | None:
    largest = float(sample.sizes[-1])
    if largest > LARGEST_WHOLE:
        return NoTail(
            reason=f"the largest size, {largest:g}, is beyond 2^53, where whole numbers can no longer be told apart: "
            "judge such sizes as measured"
        )
    if sample.cells is None:
        broken = sample.sizes[sample.sizes != np.floor(sample.sizes)]
        if broken.size:
            return NoTail(reason=f"{_size(broken[0])} is not a whole number: judge these sizes as measured")
    return None


def _size(value: float) -> str:
    return f"{value:.6g}"
