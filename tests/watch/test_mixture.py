"""The mixture: composition, equality with the event by event recursion, and its bound on false alarms."""

from __future__ import annotations

from math import exp, inf, log

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.watch import exponent, tail_share
from monitor.watch.mixture import (
    LOG_THETAS,
    Increment,
    compose,
    crossings,
    exponential_factors,
    grown,
    identity,
    idle,
    log_mean,
)
from monitor.watch.scores import Past
from monitor.watch.slots import Ordered
from tests.references.plain_detector import exponent_ratios, share_martingale, slot_by_starts

THETAS = [exp(one) for one in LOG_THETAS]
logs = st.floats(-300.0, 300.0)
increments = st.tuples(st.tuples(logs, logs), st.just(()) | st.tuples(logs, logs)).map(lambda pq: Increment(*pq))


def close(one: Increment, other: Increment) -> bool:
    if not one.ln_q or not other.ln_q:
        return one.ln_q == other.ln_q and one.ln_p == pytest.approx(other.ln_p, abs=1e-9)
    return one.ln_p + one.ln_q == pytest.approx(other.ln_p + other.ln_q, abs=1e-9)


@given(increments, increments, increments)
def test_composition_is_associative_with_the_empty_slot_as_identity(a, b, c):
    assert close(compose(compose(a, b), c), compose(a, compose(b, c)))
    assert compose(identity(2), a) == a
    assert compose(a, identity(2)) == a


@given(increments, increments, st.just(()) | st.tuples(logs, logs))
def test_folding_a_composition_is_folding_one_after_the_other(a, b, ln_r):
    one, other = grown(ln_r, compose(a, b)), grown(grown(ln_r, a), b)
    assert one == pytest.approx(other, abs=1e-9)


def test_idle_time_only_adds_the_clock():
    assert grown((), idle(2, 0.25)) == (log(0.25),) * 2
    assert grown((log(3.0),) * 2, idle(2, 0.5)) == pytest.approx((log(3.5),) * 2)
    assert log_mean(()) == -inf
    assert log_mean((log(1.0), log(3.0))) == pytest.approx(log(2.0))
    assert log_mean((1e5, 1e5)) == 1e5  # far beyond the range of a double


log_sizes = st.one_of(st.just(0.0), st.floats(1e-17, 20.0))  # ln of a ratio of doubles is 0 or larger than that


@given(st.lists(log_sizes, max_size=12), st.floats(0.01, 10.0), st.integers(0, 50))
def test_the_exponent_slot_is_the_recursion_event_by_event(values, clock, n):
    total = float(n)
    m = len(values)
    slot = Ordered(np.array(values), np.arange(1, m + 1), m)
    done = exponent.step(Past(float(n), total), slot, clock)
    if n == 0 and sum(values[:1]) == 0:
        return  # nothing to compare with
    ratios, n_after, total_after = exponent_ratios(values, n, total, THETAS)
    for i in range(len(THETAS)):
        p, q = slot_by_starts([one[i] for one in ratios], clock, range(m)) if m else (1.0, clock)
        assert exp(done.increment.ln_p[i]) == pytest.approx(p, rel=1e-9)
        assert exp(done.increment.ln_q[i]) == pytest.approx(q, rel=1e-9)
    assert (done.past.n, done.past.total) == pytest.approx((n_after, total_after))


@given(
    st.lists(st.lists(st.booleans(), max_size=40), min_size=1, max_size=4),
    st.integers(0, 30),
    st.integers(0, 20),
    st.floats(0.01, 10.0),
)
def test_the_share_slots_are_the_martingale_event_by_event(slots, n, open_gap, clock):
    total = 7.5 * n
    state = tail_share.ShareState(Past(float(n), total), open_gap)
    path = {theta: share_martingale([e for slot in slots for e in slot], n, total, open_gap, theta) for theta in THETAS}
    begin = 0
    for events in slots:
        places = np.flatnonzero(events) + 1
        done = tail_share.step(state, Ordered(np.zeros(places.size), places, len(events)), clock)
        starts = [j * len(events) // min(16, len(events)) for j in range(min(16, len(events)))] or [0]
        for i, theta in enumerate(THETAS):
            end = path[theta][begin + len(events)]
            assert exp(done.increment.ln_p[i]) == pytest.approx(end / path[theta][begin], rel=1e-9)
            mean = np.mean([end / path[theta][begin + start] for start in starts])
            assert exp(done.increment.ln_q[i]) == pytest.approx(clock * mean, rel=1e-9)
        state = done.state
        begin += len(events)


def test_crossings_are_those_of_the_plain_recursion():
    rng = np.random.default_rng(3)
    factors = exponential_factors(rng.standard_exponential(5000) * 1.1, LOG_THETAS)
    clock = rng.uniform(0.5, 1.5, 5000)
    plain, r = [], np.zeros(len(LOG_THETAS))
    for step in range(5000):
        r = (r + clock[step]) * np.exp(factors[step])
        if r.mean() >= 200.0:
            plain.append(step)
            r[:] = 0.0
    assert len(plain) > 10
    assert crossings(factors, np.log(clock), log(200.0)).tolist() == plain


def test_each_factor_has_mean_one_and_evidence_grows_like_the_clock():
    # Shin, Ramdas & Rinaldo: E[M_t] = clock while nothing changes. Exactly, by the exponential integral:
    # integral of theta^-1 exp((1 - 1/theta) z) exp(-z) dz = 1.
    z = np.linspace(0.0, 200.0, 200_001)
    for i, theta in enumerate(THETAS):
        density = np.exp(exponential_factors(z, LOG_THETAS)[:, i] - z)
        assert np.trapezoid(density, z) == pytest.approx(1.0, abs=1e-6), theta
