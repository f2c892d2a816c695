"""The tail-share rule: has the share of events at or above xmin changed?

Scored are the gaps g (events up to and including the next exceedance) through g - 1/2, self-starting, with the
mixture of the exponent rule. The open gap counts too: a tail that vanishes must speak although no gap finishes.

Along the events of a slot the evidence is V = sum of ln L over finished gaps + (1 - 1/theta) s(open gap), without
theta^-1: the conditional expectation of the finished factor. For a known share q this is a supermartingale, event
by event, whatever q and theta. Put a = 1 - 1/theta, lambda = 1/(1/q - 1/2). For a geometric gap
E[theta^-1 exp(a lambda (g - 1/2))] = (1 - a) / (cosh h - (a/h) sinh h), h = a lambda / 2, which is <= 1 because
cosh h - 1 >= a (sinh h / h - 1) for a <= 1; call it m <= 1. One event on, the expectation of V's factor is
m + (1-q) e^(a lambda) (1 - m) <= 1, since the mean of the geometric exponential is finite, (1-q) e^(a lambda) < 1.
With an estimated past this holds in the limit and is measured (tests). The start points of a slot lie at fixed
fractions of its events, because the number of gaps in it is itself evidence.

g - 1/2 grows conservative as q grows. Beyond a share of one half the roles are exchanged (gaps between events below
xmin), so that the rarer kind is always the one that is waited for.
"""

from __future__ import annotations

import msgspec
import numpy as np
from numpy.typing import NDArray

from monitor.watch.mixture import LOG_THETAS, Increment, exponential_factors, from_path, idle
from monitor.watch.scores import Past, self_starting
from monitor.watch.slots import Ordered

STARTS = 16
"""Start points in a slot, evenly spread over its events."""

_SLOPES = -np.expm1(-np.asarray(LOG_THETAS))


class ShareState(msgspec.Struct, frozen=True):
    """past: finished gaps and the sum of g - 1/2; open_gap: events since the last exceedance.

    exchanged: the gaps run between events below xmin, fixed when the watch starts.
    """

    past: Past
    open_gap: int = 0
    exchanged: bool = False


class ShareStep(msgspec.Struct, frozen=True):
    """What the slot says, and the state after it."""

    increment: Increment
    state: ShareState


def step(state: ShareState, slot: Ordered, clock: float, hold: bool = False) -> ShareStep:
    """Fold one slot. clock: days; hold: compare with the past alone and learn nothing."""
    if not slot.events:
        return ShareStep(idle(len(LOG_THETAS), clock), state)
    places = _others(slot) if state.exchanged else slot.places
    ends = np.concatenate(([-state.open_gap], places))  # where gaps begin, in events of this slot
    gaps = np.diff(ends)
    scored = self_starting(gaps - 0.5, state.past, hold)
    factors = exponential_factors(scored.scores, LOG_THETAS)
    factors[~scored.counted] = 0.0
    finished = np.vstack((np.zeros((1, factors.shape[1])), np.cumsum(factors, axis=0)))
    spread = min(STARTS, slot.events)
    looks = np.append(np.arange(spread) * slot.events // spread, slot.events)
    passed = np.searchsorted(places, looks, side="right")
    running = finished[passed] + _SLOPES * _open_scores(state.past, gaps, passed, looks - ends[passed], hold)[:, None]
    after = ShareState(scored.past, int(slot.events - ends[-1]), state.exchanged)
    return ShareStep(from_path(running[:-1], running[-1], clock), after)


def _others(slot: Ordered) -> NDArray[np.int64]:
    below = np.ones(slot.events, bool)
    below[slot.places - 1] = False
    return np.flatnonzero(below) + 1


def _open_scores(
    past: Past, gaps: NDArray[np.int64], passed: NDArray[np.int64], open_gap: NDArray[np.int64], hold: bool
) -> NDArray[np.float64]:
    """Scores of the gaps that are open at each look, against the gaps finished by then."""
    if past.known or hold:
        n = np.full(passed.size, past.n)
        total = np.full(passed.size, past.total)
    else:
        running = np.cumsum(np.concatenate(([past.total], gaps - 0.5)))
        n, total = past.n + passed, running[passed]
    usable = (n > 0) & (total > 0)
    ratio = np.divide(open_gap, total, out=np.zeros(passed.size), where=usable)
    scores: NDArray[np.float64] = n * (ratio if past.known else np.log1p(ratio))
    return scores
