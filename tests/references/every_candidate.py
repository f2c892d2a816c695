"""The scan as one would write it without any thought of speed: every candidate against every row.

It uses the arithmetic of the kernels (their exp, zeta and exponent), so that its answer must agree with theirs to the
last bit: the same row, the same distance. min_ks.py is the reference that shares nothing with them.
"""

from __future__ import annotations

import numpy as np
from numba import njit

from monitor.tail.kernels.arithmetic import exp_nonpositive
from monitor.tail.kernels.ladder import BINNED, MEASURED, Best, Near, last_candidate, new_scratch
from monitor.tail.kernels.scanning import rate_of
from monitor.tail.kernels.whole import prepared, survival

plain = njit(nogil=True, error_model="numpy")


@plain
def _simple_distance(ladder, row):
    rate = rate_of(ladder, row)
    share = 1.0 / ladder.events[row]
    step = 1.0 if ladder.law == BINNED else 0.0
    far = 0.0
    for j in range(row, ladder.place.size):
        at = exp_nonpositive(-rate * (ladder.place[j] - ladder.place[row]))
        beyond = exp_nonpositive(-rate * (ladder.place[j] + step - ladder.place[row]))
        far = max(far, ladder.events[j] * share - at, beyond - ladder.events[j + 1] * share)
    return far


@plain
def _whole_distance(ladder, row, scratch):
    rate = rate_of(ladder, row)
    if not rate > 0.0:
        return np.inf
    law = prepared(rate + 1.0, ladder.place[row], scratch)
    share = 1.0 / ladder.events[row]
    far = 0.0
    for j in range(row, ladder.place.size):
        at = survival(law, ladder.place[j], scratch)
        beyond = survival(law, ladder.beyond[j], scratch)
        far = max(far, ladder.events[j] * share - at, beyond - ladder.events[j + 1] * share)
    return far


def distances(ladder, least):
    """Distance of every candidate, float64 (last + 1,)."""
    scratch = new_scratch(ladder.place.size)
    last = last_candidate(ladder.events, least)
    if ladder.law in (MEASURED, BINNED):
        return np.array([_simple_distance(ladder, i) for i in range(last + 1)])
    return np.array([_whole_distance(ladder, i, scratch) for i in range(last + 1)])


def nearest_of_all(ladder, least):
    """The candidate with the smallest distance; of equal ones the first."""
    all_of_them = distances(ladder, least)
    if all_of_them.size == 0 or not np.isfinite(all_of_them).any():
        return Best(-1, np.inf)
    return Best(int(np.argmin(all_of_them)), float(all_of_them.min()))


def near_of_all(ladder, least, closeness):
    """Range of rows and rates of all candidates within `closeness` times the smallest distance."""
    all_of_them = distances(ladder, least)
    close = np.flatnonzero(all_of_them <= closeness * all_of_them.min())
    rates = [rate_of(ladder, i) for i in close]
    return Near(int(close[0]), int(close[-1]), min(rates), max(rates))
