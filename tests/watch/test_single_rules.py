"""Each rule by itself: factors of mean at most one, exactly where that can be added up, and what they say."""

from __future__ import annotations

from collections import Counter
from math import exp, log

import msgspec
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from river.drift import ADWIN
from scipy.stats import binom, kstest, poisson

from monitor.watch import body, exponent, fit, groups, level, no_events, rejects, rival, single_event, tail_share
from monitor.watch.mixture import LOG_THETAS, crossings, exponential_factors
from monitor.watch.scores import Past, self_starting
from monitor.watch.slots import Counted, Ordered, SlotFacts

# --- exponent and tail share ------------------------------------------------------------------------------------


def test_the_exponent_rule_keeps_its_run_length_from_the_first_value_on():
    # N = 200, no past at all, 150 000 scores. Expected alarms are at most 750 in all; their number is nearly
    # Poisson, so 4 standard deviations more would come in 1 of 30 000 seeds. Not far fewer: the bound is not idle.
    rng = np.random.default_rng(8)
    scored = self_starting(rng.standard_exponential(150_000) * 7.3, Past())
    factors = exponential_factors(scored.scores, LOG_THETAS)
    factors[0] = 0.0
    alarms = crossings(factors, np.zeros(150_000), log(200.0)).size
    assert 0.5 * 750 < alarms < 750 + 4 * np.sqrt(750)


@pytest.mark.parametrize("share", [0.01, 0.1, 0.3, 0.5])
def test_factors_of_gaps_have_mean_at_most_one_for_every_share(share):
    # The proof's closed form and the sum over the geometric law itself.
    g = np.arange(1, int(80 / share) * 10)
    p = share * (1 - share) ** (g - 1)
    rate = 1.0 / (1.0 / share - 0.5)
    for log_theta in LOG_THETAS:
        a = 1.0 - exp(-log_theta)
        summed = float((p * np.exp(a * rate * (g - 0.5) - log_theta)).sum())
        h = a * rate / 2
        assert summed == pytest.approx((1 - a) / (np.cosh(h) - a / h * np.sinh(h)), rel=1e-6)
        assert summed <= 1.0
        # One event on inside an open gap: finished with chance q, longer with chance 1 - q.
        onward = (1 - share) * exp(a * rate) + share * exp(a * rate / 2 - log_theta)
        assert onward <= 1.0 + 1e-12


@pytest.mark.parametrize("share", [0.02, 0.3, 0.5, 0.8])
def test_the_share_rule_keeps_its_run_length_at_every_share(share):
    # Through the rule itself, slots of 50 events, clock of events, N = 2 000, 3 000 slots: at most 75 alarms
    # expected. Conservative, so 75 + 4 standard deviations is beyond chance; a share above one half is exchanged.
    rng = np.random.default_rng(9)
    state = tail_share.ShareState(Past(), exchanged=share > 0.5)
    alarms, r = 0, np.full(len(LOG_THETAS), -np.inf)
    for _ in range(3000):
        places = np.flatnonzero(rng.random(50) < share) + 1
        done = tail_share.step(state, Ordered(np.zeros(places.size), places, 50), 50.0)
        state = done.state
        r = np.logaddexp(r + done.increment.ln_p, done.increment.ln_q)
        if np.log(np.exp(r).mean()) >= log(2000.0):
            alarms, r = alarms + 1, np.full(len(LOG_THETAS), -np.inf)
    assert 10 < alarms < 75 + 4 * np.sqrt(75)


def test_a_held_exponent_rule_says_the_same_of_every_equal_slot():
    slot = Ordered(np.array([0.5, 1.0]), np.array([1, 2]), 2)
    first = exponent.step(Past(10.0, 10.0), slot, 1.0, hold=True)
    assert exponent.step(first.past, slot, 1.0, hold=True) == first


# --- groups, fit and rival --------------------------------------------------------------------------------------


def _ranks(y, law):
    state, ranked = groups.GroupState(), []
    for part in np.array_split(y, 97):  # slots of any size
        done = groups.step(state, part, law)
        state = done.state
        ranked += done.ranked
    return ranked, state


def test_ranks_are_uniform_from_the_first_group_on_and_groups_do_not_depend_on_slots():
    law = groups.GroupLaw(stream="a", size=50)
    lows = []
    for stream in range(60):
        rng = np.random.default_rng([4, stream])
        named = msgspec.structs.replace(law, stream=f"a{stream}")
        ranked, _ = _ranks(rng.standard_exponential(50 * 20) * 3.0, named)
        assert [one.group.number for one in ranked] == list(range(20))
        lows += [(one.cv_low, one.longest_low) for one in ranked]
    for column in np.array(lows).T:  # 1 200 ranks; fixed seed, 1e-4 for another
        assert kstest(column, "uniform").pvalue > 1e-4
    y = np.random.default_rng(1).standard_exponential(1000)
    whole = groups.step(groups.GroupState(), y, law)
    pieces, state = _ranks(y, law)
    assert tuple(pieces) == whole.ranked
    assert state == whole.state


def test_the_rank_of_a_group_lies_in_its_own_slice_of_the_unit_interval():
    # With j - 1 others, of which k are smaller, the randomised rank lies in (k/j, (k+1)/j).
    law = groups.GroupLaw(stream="r", size=50)
    drawn = groups.drawn_groups(law)
    earlier = (1.0, 1.5, 2.5)
    others = np.array([*drawn.cvs, *earlier])
    for seed in range(30):
        y = np.random.default_rng(seed).standard_exponential(50)
        found = groups.step(groups.GroupState(finished=seed, cvs=earlier, longests=earlier), y, law).ranked[0]
        below = (others < found.group.cv).sum()
        assert below / 44 < found.cv_low < (below + 1) / 44


def test_group_statistics_are_those_of_the_definition():
    law = groups.GroupLaw(stream="b", size=50)
    y = np.random.default_rng(2).standard_exponential(50)
    group = groups.step(groups.GroupState(), y, law).ranked[0].group
    assert group.cv == pytest.approx(50 * (y @ y) / y.sum() ** 2)
    assert group.longest == pytest.approx(y.max() / y.mean())


def test_drawn_groups_follow_their_law():
    # Mean of n sum y^2/(sum y)^2 for the exponential is 2n/(n+1) exactly (y_i/sum is Dirichlet); for the geometric
    # of the grid and for whole sizes it is near that, biased as the statistics of discrete sizes are.
    for law, expected in (
        (groups.GroupLaw(stream="c", size=100), 200 / 101),
        (groups.GroupLaw(stream="c", size=100, width=0.00675), 200 / 101),
        (groups.GroupLaw(stream="c", size=100, whole=(2.5, 5.0)), 1.95),
    ):
        drawn = groups.drawn_groups(law, 1500)
        assert np.mean(drawn.cvs) == pytest.approx(expected, abs=0.03)  # sd .2/sqrt(1500) = .006
        assert list(drawn.cvs) == sorted(drawn.cvs)


def test_fit_and_rival_factors_have_mean_one():
    # Over ranks uniform on (0, 1), by the midpoint rule on a grid that is geometric towards both ends.
    edges = np.concatenate(([0.0], np.geomspace(1e-30, 0.5, 4001)))
    low = (edges[1:] + edges[:-1]) / 2
    ranks = np.minimum(np.concatenate((low, 1 - low)), 1 - 2.0**-53)
    weight = np.tile(np.diff(edges), 2)
    one = groups.Group(0, 2.0, 5.0)
    for rule in (fit, rival):
        logs = np.array([rule.increment((groups.Ranked(one, float(q), float(q)),), 1.0).ln_p for q in ranks])
        assert (np.exp(logs) * weight[:, None]).sum(axis=0) == pytest.approx(1.0, abs=0.02)
    assert rival.cause(0) != rival.cause(5)
    assert fit.increment((), 0.5).ln_p == (0.0, 0.0, 0.0)


def test_a_small_misfit_that_was_always_there_fades():
    # Weibull of shape .97 instead of the exponential, 1 000 groups: against the null table alone it would speak.
    law = groups.GroupLaw(stream="d", size=100)
    rng = np.random.default_rng(3)
    ranked, _ = _ranks(rng.weibull(0.97, 100_000), law)
    late = [one.cv_low for one in ranked[500:]]
    assert kstest(late, "uniform").pvalue > 1e-4
    null = np.array(groups.drawn_groups(law, 2000).cvs)
    plain = np.searchsorted(null, [one.group.cv for one in ranked[500:]]) / 2000
    assert kstest(plain, "uniform").pvalue < 1e-6


# --- level, rejects -------------------------------------------------------------------------------------------------


def test_level_factors_have_mean_one_at_the_allowance_and_less_below():
    x = np.arange(0, 401)
    per_event, a_day = level.Allowance(one_in=50.0), level.Allowance(a_day=3.0)
    for i in range(len(level.RHOS)):
        logs = np.array([level.increment(per_event, 400, int(k), 1.0).ln_p[i] for k in x])
        assert np.exp(logs + binom.logpmf(x, 400, 0.02)).sum() == pytest.approx(1.0, abs=1e-9)
        assert np.exp(logs + binom.logpmf(x, 400, 0.015)).sum() < 1.0
        logs = np.array([level.increment(a_day, 400, int(k), 2.0).ln_p[i] for k in x])
        assert np.exp(logs + poisson.logpmf(x, 6.0)).sum() == pytest.approx(1.0, abs=1e-9)
        assert np.exp(logs + poisson.logpmf(x, 5.0)).sum() < 1.0


def test_levels_passed_every_other_time_have_a_ratio_still():
    assert all(np.isfinite(level.increment(level.Allowance(one_in=2.0), 10, 9, 1.0).ln_p))


@given(st.lists(st.floats(0.0, 1.0), min_size=1, max_size=300))
def test_rejects_factors_have_mean_one_at_the_baselines_own_chance(shares):
    usual = rejects.usual(tuple(shares))
    assert 0 < usual.chance <= 1
    good, bad = (
        rejects.increment(usual, 10**9, 0, 1.0),
        rejects.increment(rejects.UsualRejects(-1.0, usual.chance), 9, 0, 1.0),
    )
    for g, b in zip(good.ln_p, bad.ln_p, strict=True):
        if usual.chance < 1:
            assert (1 - usual.chance) * exp(g) + usual.chance * exp(b) == pytest.approx(1.0)
    assert rejects.usual(()) is None
    assert rejects.increment(usual, 0, 0, 2.0).ln_p == (0.0, 0.0, 0.0)


# --- no events --------------------------------------------------------------------------------------------------


def _silences(counts, expected, past):
    state, r, alarms = no_events.SilenceState(past), np.full(3, -np.inf), 0
    for place, events in enumerate(counts):
        done = no_events.step(state, stream="q", start_ns=place, events=int(events), expected=expected, clock=1.0)
        state = done.state
        r = np.logaddexp(r + done.increment.ln_p, done.increment.ln_q)
        if np.log(np.exp(r).mean()) >= log(400.0):
            alarms, r = alarms + 1, np.full(3, -np.inf)
    return alarms


@pytest.mark.parametrize("expected", [0.1, 1.0, 30.0])
def test_silence_is_scored_at_the_promised_rate_for_quiet_and_busy_streams(expected):
    # 20 000 slots at N = 400 slots: at most 50 alarms expected, Poisson; 50 + 4.5 sd = 82 (1e-5 for another seed).
    rng = np.random.default_rng(12)
    assert _silences(rng.poisson(expected, 20_000), expected, Past(500.0, 500.0)) < 82
    assert _silences(np.zeros(40), 1.0, Past(500.0, 500.0)) >= 1


def test_a_silence_is_scored_by_the_formula_whole_or_in_pieces():
    # Silent for 2.5, then events in a slot of 1 expected: n = 40 silences lasted 50 before. Second implementation.
    state = no_events.SilenceState(Past(40.0, 50.0))
    total = np.zeros(3)
    for place, expected in enumerate((1.0, 1.5)):
        done = no_events.step(state, stream="q", start_ns=place, events=0, expected=expected, clock=0.5)
        state, total = done.state, total + done.increment.ln_p
    thetas = np.array([3.0, 10.0, 30.0])
    assert total == pytest.approx((1 - 1 / thetas) * 40 * np.log1p(2.5 / 50))
    done = no_events.step(state, stream="q", start_ns=9, events=4, expected=1.0, clock=0.5)
    silence = done.state.past.total - 50.0
    assert 2.5 < silence < 3.5
    assert total + done.increment.ln_p == pytest.approx((1 - 1 / thetas) * 40 * np.log1p(silence / 50) - np.log(thetas))
    calm = no_events.SilenceState(Past(40.0, 50.0))
    fresh = no_events.step(calm, stream="q", start_ns=3, events=1, expected=0.0, clock=1.0)
    assert fresh.increment.ln_p == pytest.approx(-np.log(thetas))
    assert fresh.increment.ln_q == fresh.increment.ln_p


def test_hours_are_closed_only_when_silence_there_cannot_be_chance():
    events = [0 if hour < 100 else 50 for hour in range(168)]
    rates = no_events.week_rates(events, [8.0] * 168)
    assert set(rates[:100]) == {0.0}
    assert rates[120] == pytest.approx((50 + 68 * 50 / (168 * 8)) / 9)
    sparse = no_events.week_rates([1] + [0] * 167, [8.0] * 168)
    assert min(sparse) > 0
    with pytest.raises(ValueError, match="168"):
        no_events.week_rates([1], [1.0])
    closed = no_events.step(
        no_events.SilenceState(Past(9.0, 9.0), 0.5), stream="q", start_ns=0, events=0, expected=0.0, clock=1.0
    )
    assert closed.increment.ln_p == (0.0, 0.0, 0.0)


# --- body -------------------------------------------------------------------------------------------------------


def _slot(values, start=0):
    found = Counter(values)
    keys = sorted(found)
    return SlotFacts(
        stream="b", start_ns=start, length_ns=1, events=len(values),
        body=Counted(tuple(keys), tuple(found[key] for key in keys)),
    )  # fmt: skip


def test_the_body_rule_is_adwin_on_the_sums():
    # The library itself, fed the same sums one by one, speaks at the same sum.
    rng = np.random.default_rng(6)
    values = np.floor(np.concatenate((rng.normal(40, 8, 900), rng.normal(52, 8, 600)))).astype(int)
    plan = body.BodyPlan(1, 0.002)
    detector = ADWIN(delta=0.002)
    spoke = next(i for i, v in enumerate(values) if detector.update(int(v)) or detector.drift_detected)
    state = body.BodyState()
    for place, value in enumerate(values):
        done = body.step(state, _slot([int(value)], place), plan)
        state = done.state
        if done.speaks:
            break
    assert place == spoke
    assert state.values == ()


def test_sums_do_not_depend_on_how_slots_fall():
    plan = body.BodyPlan(7, 1e-9)
    one = body.step(body.BodyState(), _slot([5] * 100), plan).state
    state = body.BodyState()
    for size in (1, 30, 2, 60, 7):
        state = body.step(state, _slot([5] * size), plan).state
    assert state == one == body.BodyState(2, 10, (35,) * 14)


@pytest.mark.parametrize("days", [100.0, 1000.0])
def test_the_body_rule_keeps_the_run_length_it_was_set_for(days):
    # Exponential log sizes, the most skewed usual body. 4 values a day; 12 alarms are expected at most: 12 + 4 sd.
    plan = body.plan_for(4.0, days)
    assert plan.events_a_value == 1
    rng = np.random.default_rng(7)
    state, alarms = body.BodyState(), 0
    for place in range(int(12 * days * 4 / 32)):
        done = body.step(state, _slot(np.floor(rng.standard_exponential(32) * 7).astype(int).tolist(), place), plan)
        state = done.state
        alarms += done.speaks
        assert len(state.values) <= body.LONGEST + 32
    assert alarms < 12 + 4 * np.sqrt(12)


# --- single event -----------------------------------------------------------------------------------------------


@pytest.mark.parametrize("by_record", [False, True])
def test_single_events_come_at_the_promised_rate_at_any_rate_of_events(by_record):
    # Days with 0 to 400 exceedances where 40 were expected, N/w = 20 days, 8 000 days: at most 400 expected alarms,
    # Poisson: 400 + 4 sd = 480 (3e-5 for another seed).
    plan = single_event.plan_for(days_between=20.0, exceedances_a_day=40.0, tells_passages=False, by_record=by_record)
    rng = np.random.default_rng(14)
    state, past, alarms = single_event.SingleState(), Past(), 0
    for day in range(8000):
        y = rng.standard_exponential(int(rng.integers(0, 400)) if day % 7 == 0 else int(rng.poisson(20)))
        slot = SlotFacts(
            stream="e", start_ns=day, length_ns=86_400 * 10**9, events=y.size,
            largest=float(np.exp(y.max())) if y.size else None,
        )  # fmt: skip
        done = single_event.step(state, slot, Ordered(y, np.arange(1, y.size + 1), y.size), past, plan)
        state, past = done.state, past.with_more(y.size, float(y.sum()))
        alarms += done.cause is not None
        assert state.credit >= 0
    assert alarms < 480
    assert by_record or alarms > 200  # the bound is not idle


def test_cells_below_a_passage_are_told_as_facts_only_where_passages_are_rare():
    plan = single_event.plan_for(days_between=900.0, exceedances_a_day=5.0, tells_passages=True, by_record=False)
    slot = SlotFacts(stream="e", start_ns=0, length_ns=10**9, events=1, passages=1, largest=7.0)
    order = Ordered(np.array([0.1]), np.array([1]), 1)
    told = single_event.step(single_event.SingleState(), slot, order, Past(10.0, 10.0), plan)
    assert told.cause == single_event.ABOVE
    quiet = msgspec.structs.replace(plan, tells_passages=False)
    assert single_event.step(single_event.SingleState(), slot, order, Past(10.0, 10.0), quiet).cause is None
