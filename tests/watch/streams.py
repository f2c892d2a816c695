"""Streams for the tests of the watch: slots made of independent events, and what became of watching them."""

from __future__ import annotations

from collections import Counter

import numpy as np

from monitor.watch import rules
from monitor.watch.baseline import measured
from monitor.watch.level import Allowance
from monitor.watch.slots import SlotFacts, Yardstick, facts_of

HOUR = 3_600 * 10**9
DAY = 24 * HOUR
YARDSTICK = Yardstick(xmin=100.0, passage=1000.0)


def power_law(alpha):
    """Draws sizes over xmin = 100."""
    return lambda rng, n: 100.0 * np.exp(rng.standard_exponential(n) / (alpha - 1.0))


def stream_of(seed, days, *, draw=power_law(2.5), share=0.1, rate=400.0, start=0, length=DAY, rejects=0.01, name="s"):  # noqa: B008
    """Slots of a stream whose events are independent: `rate` a day, a share of them drawn by `draw` over xmin."""
    rng = np.random.default_rng([seed, start // HOUR])
    slots = []
    for at in range(start, start + round(days * DAY), length):
        n = int(rng.poisson(rate * length / DAY))
        tail = rng.random(n) < share
        sizes = np.where(tail, draw(rng, n), 99.0 * np.exp(-rng.standard_exponential(n)))
        lines = n + int(rng.binomial(n, rejects))
        slot = SlotFacts(
            stream=f"{name}-{seed}",
            start_ns=at,
            length_ns=length,
            hour=at // HOUR % 168,
            lines=lines,
            rejected=lines - n,
        )
        slots.append(facts_of(sizes, np.ones(n, np.int64), slot, YARDSTICK))
    return slots


def watch_of(slots, budget_days, alpha=2.5, allowance=Allowance(one_in=250.0)):  # noqa: B008
    """The watch against a baseline measured on `slots`."""
    return rules.begin(measured(slots, yardstick=YARDSTICK, alpha=alpha, allowance=allowance), budget_days)


def spoken_by(watch, slots, stop=False):
    """Everything that is spoken while the slots are folded; with `stop`, only up to the first slot that speaks."""
    state = rules.start(watch, slots[0].start_ns)
    out = []
    for slot in slots:
        done = rules.step(watch, state, slot)
        state = done.state
        out.extend(done.spoken)
        if stop and out:
            break
    return out


def tally(spoken):
    """How often each rule spoke."""
    return Counter(one.rule for one in spoken)
