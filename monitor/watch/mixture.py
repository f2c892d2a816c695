"""The Shiryaev-Roberts mixture: how a rule collects evidence, with a bound on its false alarms that needs no table.

A rule turns each slot into factors E, one for each theta of a small grid, with E[E | past] <= 1 while nothing has
changed. It keeps, for each theta, R <- (R + c) E, where c is the slot's length on one clock common to all rules
(days), and speaks when the mean M of the R over the grid reaches N / w: N is the budget (days between false
alarms), w the rule's weight. Then R restarts at 0.

Bound. E[R_k | past] <= R_{k-1} + c_k, so M_k - (clock since the restart) is a supermartingale; at the rule's first
alarm T, E[M_T] <= E[clock at T], and M_T >= N/w there, so by optional stopping P(T <= t) N/w <= E[clock at min(T, t)]
<= t. Summed over restarts: *the expected number of false alarms of the rule in any span t is at most t w / N*, whatever
the dependence between rules and streams; with weights that sum to 1, at most t / N for all together.
(J. Shin, A. Ramdas & A. Rinaldo, E-detectors: a nonparametric framework for sequential change detection, New
England Journal of Statistics in Data Science 2 (2024); A. N. Shiryaev, Theory of Probability and its Applications 8
(1963); S. W. Roberts, Technometrics 8 (1966); the average run length as the yardstick: E. S. Page, Biometrika 41
(1954); G. Lorden, Annals of Mathematical Statistics 42 (1971) for the delay, which no rule with the same bound beats by
more than a constant as N grows.)

Inside a slot the start of a change may lie anywhere: with start points at several places of the slot, each with an
equal part of c, R <- R P + c Q, P the product over the whole slot and Q the mean of the products from each start
point on. Each of these products has mean <= 1, so the bound stands, and a busy slot is not blunt. An empty slot is
P = 1, Q = c. Slots compose: (P1, Q1)(P2, Q2) = (P1 P2, Q1 P2 + Q2), associative, with (1, 0) the identity.
Everything is in logarithms; evidence easily passes the range of a double.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import exp, inf, log, log1p

import msgspec
import numpy as np
from numpy.typing import NDArray

Logs = tuple[float, ...]

LOG_THETAS: Logs = (-0.6, -0.3, -0.15, -0.08, 0.08, 0.15, 0.3, 0.6)
"""ln theta for exponential scores: theta is the factor by which the mean of the scores has grown."""


class Increment(msgspec.Struct, frozen=True):
    """What one slot says, for each theta: ln P, and ln Q with the clock in it.

    None stands for ln 0, which JSON has no word for: the identity has Q = 0, and ln_q is then empty.
    """

    ln_p: Logs
    ln_q: Logs

    @property
    def thetas(self) -> int:
        """How many members the mixture has."""
        return len(self.ln_p)


def identity(thetas: int) -> Increment:
    """The increment of no time and no events."""
    return Increment((0.0,) * thetas, ())


def idle(thetas: int, clock: float) -> Increment:
    """The increment of time in which nothing was scored."""
    return Increment((0.0,) * thetas, (log(clock),) * thetas if clock > 0 else ())


def compose(first: Increment, then: Increment) -> Increment:
    """Both increments, one after the other: (P1 P2, Q1 P2 + Q2)."""
    return Increment(
        tuple(a + b for a, b in zip(first.ln_p, then.ln_p, strict=True)),
        grown(first.ln_q, then),
    )


def grown(ln_r: Logs, by: Increment) -> Logs:
    """ln(R P + Q) for each theta; an empty tuple stands for R = 0."""
    if not ln_r:
        return by.ln_q
    moved = tuple(r + p for r, p in zip(ln_r, by.ln_p, strict=True))
    if not by.ln_q:
        return moved
    return tuple(_log_sum(a, b) for a, b in zip(moved, by.ln_q, strict=True))


def log_mean(logs: Logs) -> float:
    """ln of the mean of exp(logs); -inf for an empty tuple (R = 0)."""
    if not logs:
        return -inf
    top = max(logs)
    return top + log(sum(exp(one - top) for one in logs) / len(logs))


def _log_sum(a: float, b: float) -> float:
    low, high = (a, b) if a < b else (b, a)
    return high + log1p(exp(low - high))


def exponential_factors(scores: NDArray[np.float64], log_thetas: Sequence[float]) -> NDArray[np.float64]:
    """ln of theta^-1 exp((1 - 1/theta) s): the likelihood ratio of mean theta against mean 1.

    Parameters: scores float64 (m,), Exp(1) while nothing has changed. Returns float64 (m, thetas).
    """
    logs = np.asarray(log_thetas, np.float64)
    out: NDArray[np.float64] = scores[:, None] * -np.expm1(-logs) - logs
    return out


def from_path(path: NDArray[np.float64], end: NDArray[np.float64], clock: float) -> Increment:
    """The increment of a slot whose evidence runs along a path.

    Parameters: path float64 (starts, thetas), ln of the running product at each start point, the first of which is
    the start of the slot; end float64 (thetas,), the same at its end; clock, the slot's length in days.
    """
    products = end - path
    top = products.max(axis=0)
    ln_q = top + np.log(np.exp(products - top).mean(axis=0)) + log(clock)
    return Increment(tuple(products[0].tolist()), tuple(ln_q.tolist()))


def crossings(factors: NDArray[np.float64], ln_clock: NDArray[np.float64], ln_threshold: float) -> NDArray[np.int64]:
    """Where a mixture that restarts after each alarm would speak, on a whole path at once.

    Parameters: factors float64 (t, thetas), ln E of each step; ln_clock float64 (t,), ln c of each step. The
    recursion is R <- (R + c) E. Returns int64 (alarms,): the steps at which M >= exp(ln_threshold). For simulation.
    """
    found: list[int] = []
    start, length = 0, 512
    carried: NDArray[np.float64] = np.full(factors.shape[1], -np.inf)
    while start < factors.shape[0]:
        stop = min(start + length, factors.shape[0])
        sums = np.cumsum(factors[start:stop], axis=0)
        before = np.vstack((np.zeros((1, sums.shape[1])), sums[:-1]))
        mass = ln_clock[start:stop, None] - before
        mass[0] = np.logaddexp(mass[0], carried)
        ln_r = sums + np.logaddexp.accumulate(mass, axis=0)
        top = ln_r.max(axis=1)
        means = top + np.log(np.exp(ln_r - top[:, None]).mean(axis=1))
        over = np.flatnonzero(means >= ln_threshold)
        if over.size:
            found.append(start + int(over[0]))
            start, length = found[-1] + 1, 512
            carried = np.full(factors.shape[1], -np.inf)
        else:
            carried = ln_r[-1]
            start, length = stop, min(2 * length, 65_536)
    return np.array(found, np.int64)
