"""Distances of whole sizes (zeta law), exact or on the grid, and bounds that refuse many candidates at once.

A row holds the whole sizes u..u'-1: one integer (u' = u + 1), or on the grid all integers of a cell. Candidate i has
the survival function P(X >= v) = zeta(a, v)/zeta(a, u_i), Hurwitz's zeta. Data and model agree outside the rows'
ends, so the supremum over the integers is the largest of W_j/W_i - P(X >= u_j) and P(X >= u'_j) - W_{j+1}/W_i.

**The exponent** of highest likelihood makes E_a[ln X | X >= u_i] equal the data's mean of ln X (Clauset, Shalizi &
Newman 2009, eq. B.8). In a row of several integers the data's part is E_a[ln X | row], which hardly moves with a:
it is taken as m - (a - 2) v with mean m and variance v of ln X in the row under the exponent 2. Cells are 0.0045 wide
in ln X and nearly symmetric, so that the error, a fourth cumulant, is below 1e-10 (a - 2)^3.

**Many candidates refused by one row.** E_a[ln X | X >= u] falls in a and rises with u; the data's mean L_i(a) of the
rows i and above rises with i. So for p <= i <= q, with alpha_i the exponent of candidate i,
    E[alpha_i, u_p] <= E[alpha_i, u_i] = L_i <= L_q, hence alpha_i >= a_low, the exponent with E[a, u_p] = L_q(a);
    E[alpha_i, u_q] >= L_i >= L_p,                   hence alpha_i <= a_high, where E[a, u_q] = L_p(a).
The survival zeta(a, v)/zeta(a, u) falls in a and rises with u, so for a witness j > q every distance is at least
    W_j/W_p - zeta(a_low, u_j)/zeta(a_low, u_q)    and    zeta(a_high, u'_j)/zeta(a_high, u_p) - W_{j+1}/W_q.
"""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np

from monitor.tail.kernels.arithmetic import exp_apart, log_ratio, logarithm
from monitor.tail.kernels.compiling import inner, int64, kernel
from monitor.tail.kernels.ladder import PROBES, Ladder, Scratch, Worst, distance_of, noted
from monitor.tail.kernels.zeta import (
    NEGLIGIBLE,
    by_series,
    exponent,
    fill_series,
    mean_log,
    scaled_zeta,
    series_starts,
)

SLACK = 1e-12
"""More than any rounding error of a deviation."""

BLOCK_SLACK = 1e-10
"""More than any error of a bound, which rests on exponents found by iteration."""


class Zeta(NamedTuple):
    """A survival function made ready: exponent, start, 1 / (start^s zeta(s, start)), how many survivals from the
    start on were summed one by one, and the first whole size whose survival comes from the series (infinite: after
    those summed it is nought)."""

    s: float
    start: float
    scale: float
    summed: int
    series_from: float


@inner
def whole_rate(ladder: Ladder, row: int) -> Any:
    """Exponent less one of candidate `row`."""
    held = ladder.events[row]
    return exponent(ladder.place[row], ladder.spread[row] / held, ladder.within[row] / held, 0.0) - 1.0


@kernel
def prepared(s: float, start: float, scratch: Scratch) -> Any:
    """The survival function of the zeta law from `start` on: terms[k] = sum over l >= k of (1 + l/start)^-s."""
    terms = scratch.terms
    fill_series(s, scratch.series)
    begin = series_starts(s)
    k = 0
    rest = 0.0
    done = False
    while start + k < begin and not done:
        terms[k] = exp_apart(-s * log_ratio(start + k, start))
        done = terms[k] < NEGLIGIBLE
        k += 1
    if not done:
        rest = exp_apart(-s * log_ratio(start + k, start)) * by_series(scratch.series, start + k)
    terms[k] = rest
    for i in range(k - 1, -1, -1):
        terms[i] += terms[i + 1]
    return Zeta(s, start, 1.0 / terms[0], k, np.inf if done else start + k)


@kernel
def survival(law: Zeta, v: float, scratch: Scratch) -> Any:
    """P(X >= v) for a whole v >= law.start."""
    if v >= law.series_from:
        return exp_apart(-law.s * log_ratio(v, law.start)) * by_series(scratch.series, v) * law.scale
    k = v - law.start
    if k >= law.summed:
        return 0.0
    return scratch.terms[int64(k)] * law.scale


@inner
def _look(ladder: Ladder, row: int, j: int, law: Zeta, worst: Worst, scratch: Scratch) -> Any:
    """(worst after comparing data and model at row j, survival at its lowest size, survival beyond it)."""
    share = 1.0 / ladder.events[row]
    at = survival(law, ladder.place[j], scratch)
    beyond = survival(law, ladder.beyond[j], scratch)
    return (
        noted(worst, j, ladder.events[j] * share - at, beyond - ladder.events[j + 1] * share),
        at,
        beyond,
    )


@inner
def _searched(ladder: Ladder, row: int, law: Zeta, worst: Worst, stop: float, scratch: Scratch, depth: int) -> Any:
    """`worst` after searching all stretches on the stack: between rows l and r the deviations are at most
    W_{l+1}/W_i - P(X >= u_r) and P(X >= u'_l) - W_r/W_i."""
    events = ladder.events
    share = 1.0 / events[row]
    stack = scratch.ends
    models = scratch.model
    while depth > 0:
        depth -= 1
        left = stack[depth, 0]
        right = stack[depth, 1]
        after_left = models[depth, 0]
        at_right = models[depth, 1]
        enough = distance_of(worst) - SLACK
        if events[left + 1] * share - at_right <= enough and after_left - events[right] * share <= enough:
            continue
        j = (left + right) >> 1
        worst, at, beyond = _look(ladder, row, j, law, worst, scratch)
        if distance_of(worst) > stop:
            return worst
        if j - left > 1:
            stack[depth, 0], stack[depth, 1], models[depth, 0], models[depth, 1] = left, j, after_left, at
            depth += 1
        if right - j > 1:
            stack[depth, 0], stack[depth, 1], models[depth, 0], models[depth, 1] = j, right, beyond, at_right
            depth += 1
    return worst


@inner
def whole_deviations(ladder: Ladder, row: int, stop: float, scratch: Scratch) -> Any:
    """Largest deviations of candidate `row` (a Worst): exact if the distance is at most `stop`."""
    rows = ladder.place.size
    s = whole_rate(ladder, row) + 1.0
    if not s > 1.0:  # the exponent could not be found: no candidate
        return Worst(np.inf, row, np.inf, row)
    law = prepared(s, ladder.place[row], scratch)
    worst = Worst(0.0, row, 0.0, row)
    worst, at, beyond = _look(ladder, row, row, law, worst, scratch)
    for t in range(PROBES):
        j = scratch.probes[t]
        if row < j < rows:
            worst, at, after = _look(ladder, row, j, law, worst, scratch)
    if distance_of(worst) > stop:
        return worst
    span = rows - 1 - row
    strides = 16 if span >= 16 else span
    depth = int64(0)
    left = row
    for g in range(1, strides + 1):
        right = row + (span * g) // strides
        worst, at, after = _look(ladder, row, right, law, worst, scratch)
        if right - left > 1:
            scratch.ends[depth, 0], scratch.ends[depth, 1] = left, right
            scratch.model[depth, 0], scratch.model[depth, 1] = beyond, at
            depth += 1
        left = right
        beyond = after
    if distance_of(worst) > stop:
        return worst
    return _searched(ladder, row, law, worst, stop, scratch, depth)


@inner
def _survival_ratio(s: float, v: float, start: float, series: Any) -> Any:
    """zeta(s, v) / zeta(s, start) for v >= start; NaN where s is."""
    fill_series(s, series)
    lower = scaled_zeta(s, start, series)
    return exp_apart(-s * log_ratio(v, start)) * scaled_zeta(s, v, series) / lower


@inner
def whole_bound(ladder: Ladder, p: int, q: int, j: int, above: bool, series: Any) -> Any:
    """Lower bound of the distances of candidates p..q by witness j > q, from above or from below (see top)."""
    events = ladder.events
    low = ladder.place[p]
    high = ladder.place[q]
    width = log_ratio(high, low)
    if above:
        mean = ladder.spread[q] / events[q] + width
        s = exponent(low, mean, ladder.within[q] / events[q], 0.0)
        if not s > 1.0:
            return -1.0
        return events[j] / events[p] - _survival_ratio(s, ladder.place[j], high, series) - BLOCK_SLACK
    mean = ladder.spread[p] / events[p] - width
    if mean < 1e-9:
        return -1.0
    s = exponent(high, mean, ladder.within[p] / events[p], 0.0)
    if not s > 1.0:
        return -1.0
    return _survival_ratio(s, ladder.beyond[j], low, series) - events[j + 1] / events[q] - BLOCK_SLACK


@kernel
def fill_survivals(s: float, start: float, values: Any, out: Any, scratch: Scratch) -> None:
    """P(X >= v) of the zeta law from `start` on, for float64 (n,) whole values, into `out`."""
    law = prepared(s, start, scratch)
    for i in range(values.size):
        out[i] = survival(law, values[i], scratch)


@kernel
def log_normaliser(s: float, start: float, scratch: Scratch) -> Any:
    """ln(start^s zeta(s, start)): what a log-likelihood in ln(X/start) is normalised by."""
    fill_series(s, scratch.series)
    return logarithm(scaled_zeta(s, start, scratch.series))


@kernel
def spread_of_logs(s: float, start: float) -> Any:
    """Variance of ln X under the zeta law from `start` on."""
    return -mean_log(s, start).slope
