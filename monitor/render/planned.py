"""What the baseline says in the terms of the newest judgement: its level, and its tail as a curve."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from monitor.render.seen import StreamSeen
from monitor.tail.judgement import Counting
from monitor.tail.tails import Tails, size_of


def baseline_share(stream: StreamSeen) -> float | None:
    """Share of events at or above the baseline's xmin, or None when nothing tells it.

    A plan says how sizes fall off above xmin, not how many events get there: for it today's share counts,
    so that its level answers "how large, had the exponent stayed as planned?".
    """
    base = stream.baseline
    if base is None:
        return None
    if base.n_tail is not None and base.n:
        return base.n_tail / base.n
    judged = stream.judged
    if judged is None or judged.against is None or judged.against.xmin != base.xmin:
        return None
    return judged.against.share_later or None


def baseline_tails(stream: StreamSeen) -> Tails | None:
    """The baseline's tail, or None when there is none or its share of events is unknown."""
    base, share = stream.baseline, baseline_share(stream)
    if base is None or share is None:
        return None
    counting: Counting = "whole" if base.counting == "whole" else "measured"
    return Tails(np.array([base.alpha]), np.array([base.xmin]), np.array([share]), counting)


def baseline_level(stream: StreamSeen, one_in: int) -> float | None:
    """The size that one event in `one_in` passes by the baseline; None where the baseline does not tell."""
    tails = baseline_tails(stream)
    return None if tails is None else size_of(float(tails.log_size(1.0 / one_in)[0]), tails.counting)


def fitted_tails(stream: StreamSeen) -> Tails | None:
    """The newest fitted tail."""
    found = stream.judgement
    if found is None or found.alpha is None or found.xmin is None or not found.n_tail:
        return None
    return Tails(np.array([found.alpha]), np.array([found.xmin]), np.array([found.n_tail / found.n]), found.counting)


def survival(tails: Tails, sizes: NDArray[np.float64]) -> NDArray[np.float64]:
    """Share of events at or above each size by the (one) tail, float64 (k,); NaN below its xmin."""
    return np.array([tails.at_or_above(float(size))[0] for size in sizes])
