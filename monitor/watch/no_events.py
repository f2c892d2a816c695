"""The no-events rule: has the stream been silent for longer than its own week explains?

Time is rescaled by the baseline's rates for each hour of the week, so that events come at rate 1 and closing times
take no time at all. A silence is scored from a slot's start to the first event after it (for a Poisson stream the
rest of a gap is as long as a whole one, so one score a slot is enough and a busy stream costs nothing):
s = n ln(1 + silence/past), n the scored silences so far and past their sum; finished theta^-1 exp((1 - 1/theta) s),
open without theta^-1, theta 3, 10, 30. The place of the first of k events in a slot is the least of k uniform
numbers, drawn by key. The proof rests on a Poisson stream; bursts are what the block bootstrap is for.
"""

from __future__ import annotations

from collections.abc import Sequence
from math import expm1, log, log1p

import msgspec

from monitor.watch.keyed import key_of, uniform
from monitor.watch.mixture import Increment, Logs
from monitor.watch.scores import Past

LOG_THETAS: Logs = (log(3.0), log(10.0), log(30.0))
HOURS = 168
_CLOSED = 1e-6
"""An hour counts as closed when so long a silence in it would otherwise have had less chance than this."""


class SilenceState(msgspec.Struct, frozen=True):
    """past: scored silences and their sum in rescaled time; open_time: of the silence that is still open."""

    past: Past
    open_time: float = 0.0


class SilenceStep(msgspec.Struct, frozen=True):
    """What the slot says, and the state after it."""

    increment: Increment
    state: SilenceState


def week_rates(events: Sequence[int], hours: Sequence[float]) -> tuple[float, ...]:
    """Events an hour for each hour of the week.

    Parameters: events seen in each of the 168 hours of the week, and for how many hours each was watched. An hour
    without any event is closed (rate 0) when the overall rate makes that all but impossible; else rates are drawn
    towards the overall one by one pretended hour of it. Raises ValueError for other lengths than 168.
    """
    if len(events) != HOURS or len(hours) != HOURS:
        raise ValueError("a week has 168 hours")
    watched = sum(hours)
    overall = sum(events) / watched if watched > 0 else 0.0
    return tuple(
        0.0 if not count and -span * overall < log(_CLOSED) else (count + overall) / (span + 1.0)
        for count, span in zip(events, hours, strict=True)
    )


def step(
    state: SilenceState, *, stream: str, start_ns: int, events: int, expected: float, clock: float, hold: bool = False
) -> SilenceStep:
    """Fold one slot. expected: events by the week's rates, the slot's length in rescaled time; clock: days."""
    before = _open_logs(state)
    if not events:
        after = SilenceState(state.past, state.open_time + expected)
        products = tuple(b - a for a, b in zip(before, _open_logs(after), strict=True))
    else:
        u = uniform(key_of("first event", stream, start_ns))
        # The least of k uniform numbers: 1 - (1 - u)^(1/k).
        first = -expm1(log1p(-u) / events)
        silence = state.open_time + first * expected
        score = state.past.n * log1p(silence / state.past.total) if state.past.usable else 0.0
        finished = [_slope(t) * score - t if state.past.usable else 0.0 for t in LOG_THETAS]
        products = tuple(b - a for a, b in zip(before, finished, strict=True))
        after = SilenceState(state.past if hold else state.past.with_more(1, silence), 0.0)
    return SilenceStep(Increment(products, tuple(one + log(clock) for one in products)), after)


def _slope(log_theta: float) -> float:
    return -expm1(-log_theta)


def _open_logs(state: SilenceState) -> Logs:
    if not state.past.usable or not state.open_time:
        return (0.0,) * len(LOG_THETAS)
    score = state.past.n * log1p(state.open_time / state.past.total)
    return tuple(_slope(t) * score for t in LOG_THETAS)
