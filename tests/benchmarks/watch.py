"""Run lengths, delays and cost of the watch: `python -m tests.benchmarks.watch`.

Numbers of events, all simulated with fixed seeds; N = 100 000 tail events for all rules together, 4 000 known
ones, each rule at its own part of the budget. Cost is a ratio of processor times in this one run.
"""

from __future__ import annotations

import time
from collections.abc import Iterator
from dataclasses import dataclass
from math import log

import msgspec
import numpy as np
from scipy.signal import lfilter

from monitor.watch import rules
from monitor.watch.baseline import measured
from monitor.watch.changepoint import History, changed
from monitor.watch.dependence import ground
from monitor.watch.mixture import LOG_THETAS, crossings, exponential_factors
from monitor.watch.runlength import gaps_run, sizes_run
from monitor.watch.scores import Past, self_starting
from monitor.watch.slots import SlotFacts, facts_of
from tests.watch.streams import DAY, HOUR, YARDSTICK, spoken_by, stream_of, tally, watch_of

N = 100_000
PRIOR = 4000
SIZES = log(N / rules.WEIGHTS["exponent"])
SHARE = log(N / rules.WEIGHTS["tail share"])


@dataclass(frozen=True)
class Line:
    what: str
    measured: str
    target: str
    met: bool | None

    def text(self) -> str:
        mark = {True: "met", False: "MISSED", None: ""}[self.met]
        return f"{self.what:64} {self.measured:>24}   {self.target:14} {mark}"


def in_control(steps: int = 3_000_000) -> Line:
    """Alarms of the exponent rule on one long quiet path; its part of the budget allows steps w / N."""
    rng = np.random.default_rng(1)
    alarms = 0
    for _ in range(10):
        z = self_starting(rng.standard_exponential(steps // 10), Past(float(PRIOR), rng.gamma(PRIOR))).scores
        alarms += crossings(exponential_factors(z, LOG_THETAS), np.zeros(z.size), SIZES).size
    allowed = steps * rules.WEIGHTS["exponent"] / N
    return Line(
        f"exponent, no change: alarms in {steps} tail events", str(alarms), f"<= {allowed:.0f}", alarms <= allowed
    )


def run_length() -> Line:
    """Mean run length of a rule with the whole budget, at N = 10 000 (shorter, the same law)."""
    ran = sizes_run(1.0, prior=PRIOR, ln_threshold=log(10_000.0), runs=150, key=11, cap=150_000)
    mean = float(ran.steps.mean())
    return Line("exponent, no change, N = 10 000: mean run length", f"{mean:.0f}", ">= 10 000", mean >= 10_000)


def delay(what: str, growth: float, mean_at_most: float, most: float | None) -> Line:
    """Delay after 500 quiet tail events."""
    ran = sizes_run(growth, prior=PRIOR - 500, ln_threshold=SIZES, runs=1000, key=12, quiet=500)
    steps = ran.steps[ran.steps > 0]
    mean, q90 = float(steps.mean()), float(np.quantile(steps, 0.9))
    target = f"<= {mean_at_most:.0f}" + (f" / {most:.0f}" if most else "")
    return Line(what, f"{mean:.0f} / {q90:.0f}", target, mean <= mean_at_most and (most is None or q90 <= most))


def share() -> Line:
    """The share rule, on the clock of events: N tail events are N / .05 events."""
    ran = gaps_run(0.05, 0.08, prior=PRIOR - 500, ln_threshold=SHARE + log(20.0), runs=1000, key=13, quiet=500)
    mean = float(ran.clock[ran.steps > 0].mean())
    return Line("tail share 5 -> 8 %: mean delay in events", f"{mean:.0f}", "<= 1500", mean <= 1500)


def coverage(growth: float, runs: int = 200) -> Line:
    """How often the 95 % set holds the true moment, looked at when the rule speaks."""
    rng = np.random.default_rng(14)
    covered = spoke = 0
    for _ in range(runs):
        y = rng.standard_exponential(6000)
        y[1500:] *= growth
        total = float(rng.gamma(PRIOR))
        z = self_starting(y, Past(float(PRIOR), total)).scores
        at = crossings(exponential_factors(z, LOG_THETAS), np.zeros(z.size), SIZES)
        if not at.size or at[0] < 1500:
            continue
        seen = y[: at[0] + 1]
        found = changed(
            History(
                starts=np.arange(seen.size),
                end_ns=seen.size,
                counts=np.ones(seen.size, np.int64),
                sums=seen,
                weights=np.ones(seen.size),
                before=Past(float(PRIOR), total),
            ),
            growth > 1,
        )
        assert found is not None
        spoke += 1
        covered += found.from_ns <= 1500 < found.to_ns
    part = covered / spoke
    return Line(f"set holds the change, mean log size x {growth:.2f}", f"{part:.3f} of {spoke}", ">= 0.90", part >= 0.9)


def many_streams(streams: int = 1000, days: int = 20) -> Line:
    """All rules of 1 000 streams, 20 days: a receiver who allows one false alarm in half a day."""
    budget = rules.stream_budget(0.5, streams)
    alarms = 0
    for seed in range(streams):
        watch = watch_of(stream_of(seed, 7, length=6 * HOUR), budget)
        alarms += len(spoken_by(watch, stream_of(seed, days, start=7 * DAY)))
    return Line(
        f"{streams} streams, {days} days: false alarms", str(alarms), f"<= {days / 0.5:.0f}", alarms <= days / 0.5
    )


def cost() -> list[Line]:
    """Processor time of a slot, quiet and busy, all nine rules."""
    watch = watch_of(stream_of(1, 21, length=HOUR, rate=1200.0), 60.0)
    spent = {}
    for rate in (2400.0, 24_000.0, 240_000.0, 2_400_000.0):
        slots = stream_of(2, 1, start=21 * DAY, length=HOUR, rate=rate)
        begin = time.process_time()
        spoken_by(watch, slots)
        spent[rate] = (time.process_time() - begin) / len(slots)
    each = {rate: seconds / (rate / 24) for rate, seconds in spent.items()}
    flat = each[2_400_000.0] / each[240_000.0]
    return [
        Line("a slot of 100 events", f"{spent[2400.0] * 1e6:.0f} us", "", None),
        Line("an event in slots of 10 000", f"{each[240_000.0] * 1e9:.0f} ns", "", None),
        Line("cost per event, slots of 100 000 : slots of 10 000", f"{flat:.2f}", "<= 2", flat <= 2),
    ]


def dependent(kind: str, seed: int, days: int) -> list[SlotFacts]:
    """Hourly slots of 40 events that depend on one another."""
    rng = np.random.default_rng(seed)
    counts = rng.poisson(40, days * 24)
    if kind == "AR(1) log sizes, memory 0.5":
        z = lfilter([1.0], [1.0, -0.5], rng.standard_normal(int(counts.sum())) * np.sqrt(0.75))
        sizes = 20 * np.exp(1.2 * z)
    else:
        hours = np.repeat(np.arange(days * 24), counts)
        swing = 0.25 * np.sin(2 * np.pi * hours / 24) if kind == "daily cycle of alpha - 1, 25 %" else 0.0
        y = rng.standard_exponential(hours.size) / (1.5 * (1 + swing))
        sizes = np.where(rng.random(hours.size) < 0.1, 100 * np.exp(y), 50.0)
    parts = np.split(sizes, np.cumsum(counts)[:-1])
    if kind == "30 % of events repeated":
        parts = [np.concatenate((part, part[rng.random(part.size) < 0.3])) for part in parts]
    return [
        facts_of(
            part, np.ones(part.size, np.int64), SlotFacts(stream=kind, start_ns=i * HOUR, length_ns=HOUR), YARDSTICK
        )
        for i, part in enumerate(parts)
    ]


def dependence(kind: str, future: int = 300) -> Line:
    """False alarms of the exponent and the share rule with the budget as asked and as raised on 84 days of past."""
    asked, past_days = 8.0, 84
    counts = []
    raises = []
    for seed in (1, 2, 3):
        slots = dependent(kind, seed, past_days + future)
        past = slots[: past_days * 24]
        base = measured(past[: 28 * 24], yardstick=YARDSTICK, alpha=2.5)
        found = ground(past, YARDSTICK, budget_days=asked, prior=base.exceedances, most=60_000)
        row = []
        for days in (asked, found.budget_days):
            watch = rules.begin(base, days)
            kept = tuple(rules.Ruled(r.rule, r.weight, log(days / rules.WEIGHTS[r.rule])) for r in watch.rules)
            told = tally(spoken_by(msgspec.structs.replace(watch, rules=kept), slots[past_days * 24 :]))
            row.append(told["exponent"] + told["tail share"])
        counts.append(row)
        raises.append(found.budget_days / asked)
    plain, raised = np.array(counts).mean(axis=0)
    allowed = future / asked * (rules.WEIGHTS["exponent"] + rules.WEIGHTS["tail share"])
    text = f"{plain:.0f} -> {raised:.0f} (N x {np.median(raises):.3g})"
    return Line(f"{kind}: false alarms", text, f"<= {allowed:.0f}", raised <= allowed)


def lines() -> Iterator[Line]:
    """Every figure, each as soon as it is there."""
    yield in_control()
    yield run_length()
    yield delay("2.3 -> 2.1: mean / 90 % delay in tail events", 1.3 / 1.1, 750, 1300)
    yield delay("2.5 -> 2.2: mean / 90 % delay in tail events", 1.5 / 1.2, 420, None)
    yield share()
    yield coverage(1.3 / 1.1)
    yield coverage(1.5 / 1.2)
    yield coverage(1.5 / 1.8)
    yield from cost()
    yield dependence("30 % of events repeated")
    yield dependence("AR(1) log sizes, memory 0.5")
    yield dependence("daily cycle of alpha - 1, 25 %")
    yield many_streams()


if __name__ == "__main__":
    for line in lines():
        print(line.text(), flush=True)
