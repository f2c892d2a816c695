"""Since when: the posterior of the moment of a change, with an unknown level before it.

Values (log sizes, or gaps) are exponential with one mean up to nu and theta times that mean after it. The mean is
unknown, so the likelihood is that of the ratios alone (scale-invariant):
LR(nu) = mean over theta of theta^-(n - nu) [S_n / (S_nu + (S_n - S_nu)/theta)]^n,
S_k the sum of the first k values, n their number, the baseline's included. With a flat prior over the values the
posterior is proportional to LR; the 95 % set takes moments in order of their posterior. A Bayesian set has no
exact frequency; measured coverage is .92 to .97 for changes of alpha by 0.2 or more (promise 90 %).
(Likelihood of a change-point: D. V. Hinkley, Biometrika 57 (1970); invariance: E. L. Lehmann & J. P. Romano,
Testing Statistical Hypotheses, ch. 6.) A mean that was planned on counts as known: then the plain likelihood ratio.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Literal

import msgspec
import numpy as np
from numpy.typing import NDArray

from monitor.watch.scores import Past
from monitor.watch.slots import SlotFacts, Yardstick, ordered

_LEVEL = 0.95
_BLOCKS = 120
_CLEARLY = 3.0
"""Difference of log-likelihoods (e^3 = 20 times as likely) from which a shape of the change is stated."""

_TO_TELL = 30
"""Values after the change from which its shape is judged at all."""

Shape = Literal["step", "ramp", "unclear"]


class History(msgspec.Struct, frozen=True, kw_only=True):
    """The stretch that is searched, slot by slot, in order of time.

    starts   int64 (k,), ns;  end_ns, the end of the last slot
    counts   int64 (k,), values in the slot (exceedances, or finished gaps)
    sums     float64 (k,), their sums
    weights  float64 (k,), prior weight of a change in the slot: events that could have been the first changed one
    before   what was known before the first slot
    """

    starts: NDArray[np.int64]
    end_ns: int
    counts: NDArray[np.int64]
    sums: NDArray[np.float64]
    weights: NDArray[np.float64]
    before: Past


class Change(msgspec.Struct, frozen=True, kw_only=True):
    """When and how much.

    at_ns           most probable start of the changed stretch
    from_ns, to_ns  the 95 % set (its hull, when it has gaps)
    before, after   mean of the values before and from at_ns on (log sizes: 1/(alpha - 1); gaps: 1/share - 1/2)
    counted         values after at_ns
    shape           whether a step or a steady ramp describes the change better
    """

    at_ns: int
    from_ns: int
    to_ns: int
    before: float
    after: float
    counted: int
    shape: Shape


def size_history(slots: Sequence[SlotFacts], yardstick: Yardstick, known_at_end: Past) -> History:
    """The history of log sizes. known_at_end: Spoken.log_sizes of an alarm at the end of these slots."""
    counts = np.array([slot.exceedances for slot in slots], np.int64)
    sums = np.array([float(ordered(slot, yardstick).y.sum()) for slot in slots])
    return _history(slots, counts, sums, counts.astype(np.float64), known_at_end)


def share_history(slots: Sequence[SlotFacts], known_at_end: Past, exchanged: bool = False) -> History:
    """The history of gaps, by their number and sum in each slot. known_at_end: Spoken.gaps."""
    events = np.array([slot.events for slot in slots], np.int64)
    above = np.array([slot.exceedances for slot in slots], np.int64)
    counts = events - above if exchanged else above
    return _history(slots, counts, events - 0.5 * counts, events.astype(np.float64), known_at_end)


def _history(
    slots: Sequence[SlotFacts],
    counts: NDArray[np.int64],
    sums: NDArray[np.float64],
    weights: NDArray[np.float64],
    known: Past,
) -> History:
    before = known
    if not known.known:
        # A watch that held back (its alarm stood) knew less than these slots hold: then nothing was known before.
        n, total = known.n - float(counts.sum()), known.total - float(sums.sum())
        before = Past(n, total) if n > 0 and total > 0 else Past()
    return History(
        starts=np.array([slot.start_ns for slot in slots], np.int64),
        end_ns=slots[-1].end_ns,
        counts=counts,
        sums=sums,
        weights=weights,
        before=before,
    )


def changed(history: History, grew: bool) -> Change | None:
    """When the mean grew (or fell). None when the history holds nothing that could have changed."""
    if not history.weights.any():
        return None
    thetas = np.exp(np.linspace(0.03, 1.0, 25))
    logs = _log_ratios(history, thetas if grew else 1.0 / thetas)
    with np.errstate(divide="ignore"):
        logs = logs + np.log(history.weights)
    posterior = np.exp(logs - logs.max())
    posterior /= posterior.sum()
    order = np.argsort(-posterior, kind="stable")
    kept = order[: int(np.searchsorted(np.cumsum(posterior[order]), _LEVEL)) + 1]
    best = int(order[0])
    ends = np.append(history.starts[1:], history.end_ns)
    n_after, sum_after = int(history.counts[best:].sum()), float(history.sums[best:].sum())
    n_before = history.before.n + float(history.counts[:best].sum())
    sum_before = history.before.total + float(history.sums[:best].sum())
    return Change(
        at_ns=int(history.starts[best]),
        from_ns=int(history.starts[kept].min()),
        to_ns=int(ends[kept].max()),
        before=sum_before / n_before if n_before else 0.0,
        after=sum_after / max(n_after, 0.5),
        counted=n_after,
        shape=_shape(history) if n_after >= _TO_TELL else "unclear",
    )


def _log_ratios(history: History, thetas: NDArray[np.float64]) -> NDArray[np.float64]:
    """ln LR for a change with the start of each slot; float64 (k,)."""
    after = np.cumsum(history.counts[::-1])[::-1].astype(np.float64)[:, None]
    sums = np.cumsum(history.sums[::-1])[::-1][:, None]
    if history.before.known:
        mean = history.before.total / history.before.n
        logs = -after * np.log(thetas) + (1.0 - 1.0 / thetas) * sums / mean
    else:
        n = history.before.n + history.counts.sum()
        total = history.before.total + history.sums.sum()
        logs = -after * np.log(thetas) - n * np.log((total - sums + sums / thetas) / total)
    top = logs.max(axis=1)
    out: NDArray[np.float64] = top + np.log(np.exp(logs - top[:, None]).mean(axis=1))
    return out


def _shape(history: History) -> Shape:
    """Step or ramp: the better of two descriptions with a start and a size each, if clearly better.

    Ramp: the log of the mean grows in proportion to the values seen, from its start to the end of the history.
    """
    counts, sums = _merged(history)
    if counts.size < 4 or not sums.all():
        return "unclear"
    seen = np.cumsum(counts) - 0.5 * counts
    starts = np.linspace(0.0, 0.98, 40)[:, None] * seen[-1]
    progress = np.clip((seen - starts) / (seen[-1] - starts), 0.0, 1.0)
    step = np.max(_profile(history.before, counts, sums, (seen > starts).astype(np.float64)))
    ramp = np.max(_profile(history.before, counts, sums, progress))
    if abs(ramp - step) < _CLEARLY:
        return "unclear"
    return "ramp" if ramp > step else "step"


def _profile(
    before: Past, counts: NDArray[np.float64], sums: NDArray[np.float64], course: NDArray[np.float64]
) -> NDArray[np.float64]:
    """Log-likelihood with mean mu exp(beta * course), mu at its best; (courses, betas)."""
    betas = np.linspace(-2.0, 2.0, 61)
    pulled = np.stack([(sums * np.exp(-beta * course)).sum(axis=1) for beta in betas], axis=1)
    tilt = betas * (counts * course).sum(axis=1)[:, None]
    if before.known:
        mean = before.total / before.n
        known: NDArray[np.float64] = -counts.sum() * np.log(mean) - tilt - pulled / mean
        return known
    n = before.n + counts.sum()
    out: NDArray[np.float64] = -n * np.log((before.total + pulled) / n) - tilt
    return out


def _merged(history: History) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Counts and sums in at most `_BLOCKS` blocks of about equally many values, none of them empty."""
    seen = np.cumsum(history.counts)
    if not seen.size or not seen[-1]:
        return np.empty(0), np.empty(0)
    block = np.minimum((seen - 1) * _BLOCKS // seen[-1], _BLOCKS - 1)
    block = np.maximum(block, 0)
    counts = np.bincount(block, history.counts, _BLOCKS).astype(np.float64)
    sums = np.bincount(block, history.sums, _BLOCKS).astype(np.float64)
    return counts[counts > 0], sums[counts > 0]
