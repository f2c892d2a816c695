"""What a watch promises before it is switched on: how often it cries wolf, and how soon it sees a shift.

False alarms: the bound of monitor.watch.mixture, proved, not simulated. Delays: the exponent and the tail-share rule
are simulated with fixed seeds, with a past of the stated number of exceedances, from a change that comes when no
evidence has gathered yet (the slowest case), reading after every exceedance. Beside them stands the exact mean delay
of the CUSUM that knows both levels, which no rule with as few false alarms can beat (monitor.watch.cusum).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from math import ceil, exp, log
from typing import Literal

import msgspec
import numpy as np
from numpy.typing import NDArray

from monitor.watch.cusum import chart_for, run_length
from monitor.watch.keyed import key_of
from monitor.watch.mixture import LOG_THETAS
from monitor.watch.rules import WEIGHTS

What = Literal["alpha", "tail share"]
Row = NDArray[np.float64]

ALPHA_SHIFTS = (-0.5, -0.3, -0.2, 0.2, 0.3, 0.5)
SHARE_FACTOR = 1.5
SMALLEST_PROMISED = 0.15
"""Shifts of alpha below this are not promised: they drown in the error of any baseline a stream can afford."""

LADDER = (0.15, 0.2, 0.3, 0.5, 0.8, 1.2)
HORIZONS = (30, 90, 365)
RUNS = 400
_LONGEST = 30_000


class Setting(msgspec.Struct, frozen=True, kw_only=True):
    """A stream as it is planned: alpha, share of events in the tail, events a day, and what is asked of it.

    budget_days   mean days between false alarms of this stream, all rules together
    prior         exceedances in the baseline, None for a planned exponent
    weights       of the rules in force, by name; they sum to 1
    """

    alpha: float
    share: float
    events_a_day: float
    budget_days: float
    prior: int | None = 4000
    weights: Mapping[str, float] = msgspec.field(default_factory=lambda: {str(k): v for k, v in WEIGHTS.items()})

    @property
    def exceedances_a_day(self) -> float:
        """Tail events a day."""
        return self.share * self.events_a_day


class Delay(msgspec.Struct, frozen=True, kw_only=True):
    """How soon a change is seen. Numbers are None when more than a tenth (mean: any) of the runs saw nothing.

    shift             of alpha, or the factor of the tail share
    exceedances_mean, exceedances_q90, days_mean, days_q90
    optimum           exact mean delay in exceedances of the CUSUM that knows both levels; None where there is none
    """

    what: What
    shift: float
    exceedances_mean: float | None
    exceedances_q90: float | None
    days_mean: float | None
    days_q90: float | None
    optimum: float | None
    runs: int


class Smallest(msgspec.Struct, frozen=True):
    """The smallest shift of the ladder seen within so many days 9 times in 10; None: none of them."""

    days: int
    heavier: float | None
    lighter: float | None


class Usefulness(msgspec.Struct, frozen=True, kw_only=True):
    """Whether a watch can tell a change from chance within its own budget.

    chance_false, chance_seen  of the exponent rule speaking within one budget: without change, and after a shift by
                               0.5 in the direction that is harder to see
    useful_prior  exceedances the baseline needs, None if no baseline would do; useful_in_days, until then
    """

    useful: bool
    chance_false: float
    chance_seen: float
    useful_prior: int | None
    useful_in_days: float | None
    remedies: tuple[str, ...]


class Promise(msgspec.Struct, frozen=True, kw_only=True):
    """The whole promise of one stream."""

    setting: Setting
    days_between_false: float
    false_a_year: float
    delays: tuple[Delay, ...]
    smallest: tuple[Smallest, ...]
    usefulness: Usefulness
    not_promised: tuple[str, ...]


NOT_PROMISED = (
    "shifts of alpha below 0.15",
    "cut-offs beyond 50 times xmin",
    "days with bursts, repeats or cycles, unless the run length was measured on the stream's own past",
)


def promise(setting: Setting) -> Promise:
    """Run lengths of a stream. Raises ValueError unless alpha > 1, 0 < share < 1 and the rest is positive."""
    if not (setting.alpha > 1 and 0 < setting.share < 1 and setting.events_a_day > 0 and setting.budget_days > 0):
        raise ValueError("a promise needs alpha > 1, a share between 0 and 1, a rate and a budget above 0")
    ladder = {
        shift: alpha_delay(setting, shift, with_optimum=shift in ALPHA_SHIFTS)
        for size in sorted({*LADDER, *map(abs, ALPHA_SHIFTS)})
        for shift in (-size, size)
        if setting.alpha + shift > 1.05
    }
    smallest = tuple(Smallest(days, _smallest(ladder, days, -1), _smallest(ladder, days, 1)) for days in HORIZONS)
    return Promise(
        setting=setting,
        days_between_false=setting.budget_days,
        false_a_year=365.25 / setting.budget_days,
        delays=(
            *(ladder[shift] for shift in ALPHA_SHIFTS if shift in ladder),
            share_delay(setting, SHARE_FACTOR),
            share_delay(setting, 1.0 / SHARE_FACTOR),
        ),
        smallest=smallest,
        usefulness=usefulness(setting),
        not_promised=NOT_PROMISED,
    )


def _smallest(ladder: Mapping[float, Delay], days: int, sign: int) -> float | None:
    seen = [
        abs(shift)
        for shift, delay in ladder.items()
        if shift * sign > 0 and delay.days_q90 is not None and delay.days_q90 <= days
    ]
    return min(seen, default=None)


def alpha_delay(setting: Setting, shift: float, runs: int = RUNS, with_optimum: bool = True) -> Delay:
    """How soon a shift of alpha is seen by the exponent rule."""
    growth = (setting.alpha - 1.0) / (setting.alpha + shift - 1.0)
    rate = setting.exceedances_a_day
    ln_threshold = log(setting.budget_days * rate / setting.weights["exponent"])
    found = sizes_run(
        growth, prior=setting.prior, ln_threshold=ln_threshold, runs=runs, key=key_of("alpha", str(shift))
    )
    optimum = None
    if with_optimum:
        optimum = run_length(chart_for(growth, setting.budget_days * rate / setting.weights["exponent"]), growth)
    return _delay("alpha", shift, found.steps, found.steps / rate, optimum)


def share_delay(setting: Setting, factor: float, runs: int = RUNS) -> Delay:
    """How soon the tail-share rule sees the share of tail events multiplied by `factor`."""
    after = min(0.99, setting.share * factor)
    ln_threshold = log(setting.budget_days * setting.events_a_day / setting.weights["tail share"])
    found = gaps_run(
        setting.share,
        after,
        prior=setting.prior or 0,
        ln_threshold=ln_threshold,
        runs=runs,
        key=key_of("share", str(factor)),
    )
    return _delay("tail share", factor, found.steps, found.clock / setting.events_a_day, None)


def _delay(what: What, shift: float, steps: Row, days: Row, optimum: float | None) -> Delay:
    def mean(values: Row) -> float | None:
        return float(values.mean()) if np.isfinite(values).all() else None

    def q90(values: Row) -> float | None:
        # The order statistic itself: interpolating towards an unseen run would have no value.
        value = float(np.sort(values)[ceil(0.9 * values.size) - 1])
        return value if np.isfinite(value) else None

    return Delay(
        what=what,
        shift=shift,
        exceedances_mean=mean(steps),
        exceedances_q90=q90(steps),
        days_mean=mean(days),
        days_q90=q90(days),
        optimum=optimum,
        runs=steps.size,
    )


class Runs(msgspec.Struct, frozen=True):
    """Simulated runs: exceedances until the rule spoke (inf: not within the cap), and clock passed by then."""

    steps: Row
    clock: Row


def sizes_run(
    growth: float,
    *,
    prior: int | None,
    ln_threshold: float,
    runs: int,
    key: int,
    cap: int = _LONGEST,
    quiet: int = 0,
) -> Runs:
    """The exponent rule on the clock of exceedances.

    growth: factor of the mean log size after `quiet` unchanged exceedances (runs that speak before have steps <= 0);
    prior: exceedances in the baseline, None for a known exponent; cap: exceedances after the change at most.
    """
    draw = np.random.Generator(np.random.PCG64(key))
    total: Row = np.zeros(runs)
    if prior:
        total = draw.standard_gamma(prior, size=runs)

    def values(step: int) -> Row:
        return draw.standard_exponential(runs) * (growth if step > quiet else 1.0)

    found = _run(values, _Course(prior, total, 0.0, False), ln_threshold, cap + quiet)
    return Runs(found.steps - quiet, found.clock - quiet)


def gaps_run(
    share: float,
    after: float,
    *,
    prior: int,
    ln_threshold: float,
    runs: int,
    key: int,
    cap: int = _LONGEST,
    quiet: int = 0,
) -> Runs:
    """The tail-share rule on the clock of events: the share is `share`, and `after` once `quiet` gaps have passed.

    Steps and clock are counted from the change; runs that speak before have steps <= 0.
    """
    draw = np.random.Generator(np.random.PCG64(key))
    total: Row = np.zeros(runs)
    if prior:
        total = (draw.negative_binomial(prior, share, runs) + 0.5 * prior).astype(np.float64)
    passed = np.zeros(runs)

    def values(step: int) -> Row:
        gaps = draw.geometric(after if step > quiet else share, runs).astype(np.float64)
        if step <= quiet:
            np.add(passed, gaps, out=passed)
        return gaps

    found = _run(values, _Course(prior, total, 0.5, True), ln_threshold, cap + quiet)
    return Runs(found.steps - quiet, found.clock - passed)


class _Course(msgspec.Struct, frozen=True):
    """How values become scores and clock: size and sum of the past, what is taken off a value, and which clock."""

    prior: int | None
    total: Row
    less: float
    clocked_by_value: bool


def _run(values: Callable[[int], Row], course: _Course, ln_threshold: float, cap: int) -> Runs:
    """All runs side by side, one value of each at a time, until every one has spoken or `cap` is reached."""
    alive = np.arange(course.total.size)
    total = course.total.copy()
    steps, clock = np.full(total.size, np.inf), np.full(total.size, np.inf)
    evidence, passed = np.zeros((total.size, len(LOG_THETAS))), np.zeros(total.size)
    slopes, log_thetas = -np.expm1(-np.asarray(LOG_THETAS)), np.asarray(LOG_THETAS)
    threshold = exp(ln_threshold)
    before = np.zeros(alive.size) if course.clocked_by_value else None
    for step in range(1, cap + 1):
        drawn = values(step)[alive]
        value = drawn - course.less
        ticks = drawn if course.clocked_by_value else np.ones(alive.size)
        passed += ticks
        # Clock that goes with the value itself starts nothing before the value is there.
        evidence += ticks[:, None] if before is None else before[:, None]
        n = 1 if course.prior is None else course.prior + step - 1
        if n:
            scores = value if course.prior is None else n * np.log1p(value / total)
            evidence *= np.exp(np.minimum(scores, 600.0)[:, None] * slopes - log_thetas)
        total += value
        spoke = evidence.mean(axis=1) >= threshold
        if spoke.any():
            steps[alive[spoke]], clock[alive[spoke]] = step, passed[spoke]
            alive, total, evidence, passed, ticks = (one[~spoke] for one in (alive, total, evidence, passed, ticks))
            if not alive.size:
                break
        before = ticks if course.clocked_by_value else None
    return Runs(steps, clock)


def usefulness(setting: Setting, runs: int = RUNS) -> Usefulness:
    """Whether the exponent rule tells a shift of 0.5 from chance within one budget, and from which baseline on.

    Useful: seen in at least half of such stretches and at least three times as often as without a change.
    """
    days = setting.budget_days
    false, seen = _chances(setting, setting.prior, runs)
    if _beats_chance(false, seen):
        return Usefulness(
            useful=True,
            chance_false=false,
            chance_seen=seen,
            useful_prior=setting.prior,
            useful_in_days=0.0,
            remedies=(),
        )
    needed = None
    for prior in _PRIORS if setting.prior is not None else ():
        if prior > (setting.prior or 0) and _beats_chance(*_chances(setting, prior, runs)):
            needed = prior
            break
    wait = None if needed is None else (needed - (setting.prior or 0)) / setting.exceedances_a_day
    return Usefulness(
        useful=False,
        chance_false=false,
        chance_seen=seen,
        useful_prior=needed,
        useful_in_days=wait,
        remedies=(
            "a longer window, or past logs, for a larger baseline",
            f"rarer false alarms than one in {days:g} days",
            "streams pooled into one",
        ),
    )


_PRIORS = (50, 100, 200, 400, 800, 1600, 3200, 6400)


def _beats_chance(false: float, seen: float) -> bool:
    return seen >= 0.5 and seen >= 3.0 * false


def _chances(setting: Setting, prior: int | None, runs: int) -> tuple[float, float]:
    """Chance that the exponent rule speaks within one budget: without change, after the harder shift by 0.5."""
    horizon = min(_LONGEST, int(setting.budget_days * setting.exceedances_a_day))
    ln_threshold = log(setting.budget_days * setting.exceedances_a_day / setting.weights["exponent"])
    found = []
    for shift in (0.0, 0.5):
        growth = (setting.alpha - 1.0) / (setting.alpha + shift - 1.0)
        ran = sizes_run(
            growth, prior=prior, ln_threshold=ln_threshold, runs=runs, key=key_of("use", str(shift)), cap=horizon
        )
        found.append(float(np.isfinite(ran.steps).mean()))
    return found[0], found[1]
