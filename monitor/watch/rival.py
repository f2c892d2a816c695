"""The rival rule: has another tail begun to describe the sizes better than a power law?

Two one-sided looks at each group (monitor.watch.groups), three calibrators each, E = kappa p^(kappa - 1):
low cv       lognormal and stretched exponential. Both are curved families around the power law; in ln x the truncated
             lognormal is exp(-a y - b y^2), so its likelihood ratio against the power law depends on the data only
             through cv, and falls with it; for the stretched exponential cv is the score statistic at the power law.
low longest  cut-off: the largest log size against the mean, Fisher's g in its complement, free of the exponent.
It mostly repeats the fit rule and therefore has a low weight; what it adds is a name for the cause.
"""

from __future__ import annotations

from math import log

from monitor.watch.groups import Ranked
from monitor.watch.mixture import Increment, idle

KAPPAS = (0.1, 0.25, 0.5)
CURVED, CUT_OFF = "lognormal or stretched exponential", "power law with cut-off"
MEMBERS = 2 * len(KAPPAS)


def increment(ranked: tuple[Ranked, ...], clock: float) -> Increment:
    """What the groups finished in a slot say: the members of `CURVED` first, then those of `CUT_OFF`."""
    if not ranked:
        return idle(MEMBERS, clock)
    products = tuple(
        sum(log(kappa) + (kappa - 1.0) * log(p) for p in ps)
        for ps in ([one.cv_low for one in ranked], [one.longest_low for one in ranked])
        for kappa in KAPPAS
    )
    return Increment(products, tuple(one + log(clock) for one in products))


def cause(member: int) -> str:
    """Which rival the member of the mixture with the most evidence stands for."""
    return CURVED if member < len(KAPPAS) else CUT_OFF
