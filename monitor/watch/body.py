"""The body rule: has the bulk of the sizes moved? A second opinion by ADWIN on the logarithm of size.

ADWIN (A. Bifet & R. Gavalda, Learning from time-changing data with adaptive windowing, SIAM Data Mining 2007; the
implementation of the river library) cuts its window where two parts of it have means that differ. It is fed whole
numbers: log sizes in sixteenths of a factor of ten, summed over a fixed number of events so that about 120 values
come a day. Never raw sizes: their variance need not exist.

What is promised. The theorem bounds one test, not the time between false alarms, so delta is set from measured
run lengths of this very rule on independent values: at least 600 delta^-0.75 values for exponential log sizes, the most
skewed usual body (measured: 4 505 where that gives 3 374 at delta 0.1, 32 600 for 19 000 at 0.01, 238 000 for 179 000
at 0.0005; longer for bell-shaped ones; tests repeat it). Where log sizes depend on one another nothing is promised
but what the stream's own past shows.

State. The library's object cannot be stored and rebuilt bit for bit, so the state holds the values themselves, at
most `LONGEST`, and the detector is run over them afresh whenever it would look (every 32 values; under 1 ms, a few
times a day). When there are too many the older half is dropped. After an alarm the values start anew.
"""

from __future__ import annotations

from math import ceil

import msgspec
import numpy as np
from numpy.typing import NDArray

from monitor.watch.keyed import key_of, permutation
from monitor.watch.slots import SlotFacts

LONGEST = 2048
VALUES_A_DAY = 120
_CHECKS_EVERY = 32
_ARL_SCALE, _ARL_POWER = 600.0, 0.75
LARGEST_DELTA = 0.3


class BodyPlan(msgspec.Struct, frozen=True):
    """events_a_value: log sizes summed into one value; delta: ADWIN's confidence parameter."""

    events_a_value: int
    delta: float


class BodyState(msgspec.Struct, frozen=True):
    """The open sum (how many log sizes, their sum) and the finished sums since the last alarm."""

    count: int = 0
    total: int = 0
    values: tuple[int, ...] = ()


class BodyStep(msgspec.Struct, frozen=True):
    """Whether the rule speaks, and the state after the slot."""

    speaks: bool
    state: BodyState


def plan_for(events_a_day: float, days_between: float) -> BodyPlan:
    """The rule for a stream.

    Parameters: events a day; days_between, the least mean time between false alarms in days (N / w).
    """
    per_value = max(1, ceil(events_a_day / VALUES_A_DAY))
    needed = max(1.0, days_between * events_a_day / per_value)
    return BodyPlan(per_value, min(LARGEST_DELTA, (_ARL_SCALE / needed) ** (1.0 / _ARL_POWER)))


def step(state: BodyState, slot: SlotFacts, plan: BodyPlan) -> BodyStep:
    """Fold one slot: its log sizes in keyed order, cut into sums of `events_a_value`."""
    if not slot.events:
        return BodyStep(False, state)
    cells = np.repeat(np.array(slot.body.values, np.int64), np.array(slot.body.counts, np.int64))
    cells = cells[permutation(key_of("body", slot.stream, slot.start_ns), int(cells.size))]
    fresh, count, total = _sums(cells, state, plan.events_a_value)
    values = state.values + fresh
    if fresh and _drifts(values, len(fresh), plan.delta):
        return BodyStep(True, BodyState(count, total))
    if len(values) > LONGEST:
        values = values[LONGEST // 2 :]
    return BodyStep(False, BodyState(count, total, values))


def _sums(cells: NDArray[np.int64], state: BodyState, size: int) -> tuple[tuple[int, ...], int, int]:
    """Sums that finish in this slot, and what is left open: how many and their sum."""
    running = np.concatenate(([0], np.cumsum(cells)))
    ends = np.arange(size - state.count, cells.size + 1, size)
    if not ends.size:
        return (), state.count + int(cells.size), state.total + int(running[-1])
    sums = np.diff(np.concatenate(([-state.total], running[ends])))
    return tuple(sums.tolist()), int(cells.size - ends[-1]), int(running[-1] - running[ends[-1]])


def _drifts(values: tuple[int, ...], fresh: int, delta: float) -> bool:
    """Whether the detector, run over all values, finds a change while it takes in the last `fresh` ones."""
    old = len(values) - fresh
    if len(values) // _CHECKS_EVERY == old // _CHECKS_EVERY:
        return False
    # Loading the library costs half a second that readers of a store need not pay.
    from river.drift import ADWIN

    detector = ADWIN(delta=delta, clock=_CHECKS_EVERY)
    for at, value in enumerate(values):
        detector.update(value)
        if at >= old and detector.drift_detected:
            return True
    return False
