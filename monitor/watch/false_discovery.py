"""Many streams at one look: which of them to point at, with a bounded share of wrong ones.

A detector's evidence M is no e-value (its mean is the clock). With all streams restarted at fixed period starts of
length H, M/H is one at any moment of the period. Then the e-values' step-up rule keeps the expected share of false
discoveries at delta under any dependence (R. Wang & A. Ramdas, False discovery rate control with e-values, Journal
of the Royal Statistical Society B 84 (2022), Theorem 2).
"""

from __future__ import annotations

from collections.abc import Sequence
from math import log


def flagged(log_evidence: Sequence[float | None], period: float, delta: float) -> tuple[int, ...]:
    """The streams to point at, by their places in the sequence, strongest evidence first.

    Parameters: log_evidence, ln M of each stream since the period began, None for M = 0; period, its length H on
    the same clock; delta, the false discovery rate allowed. The k largest are flagged, k the largest number with
    M_(k) >= streams H / (delta k). Raises ValueError unless period and delta are positive.
    """
    if not (period > 0 and delta > 0):
        raise ValueError("period and false discovery rate must be positive")
    found = sorted(
        ((one, place) for place, one in enumerate(log_evidence) if one is not None), key=lambda x: (-x[0], x[1])
    )
    needed = log(len(log_evidence) * period / delta) if log_evidence else 0.0
    most = max((k for k, (one, _) in enumerate(found, 1) if one >= needed - log(k)), default=0)
    return tuple(place for _, place in found[:most])
