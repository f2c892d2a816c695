"""The level rule: is a size passed more often than was agreed?

Per event: passages are at most one in 1/p0, E = rho^x ((1 - rho p0)/(1 - p0))^(n - x) for n events and x passages
(the likelihood ratio of rho p0 against p0; its mean is <= 1 whenever P(passage | past) <= p0).
Per time: passages come at most at `rate` a day, E = rho^x exp(-(rho - 1) rate t), the Poisson likelihood ratio; its
mean is <= 1 whenever the intensity given the past is at most the rate (A. Wald, Annals of Mathematical Statistics 16
(1945), for the ratio; e-value: any non-negative variable of mean <= 1). Neither needs a power law.
"""

from __future__ import annotations

from math import log, log1p

import msgspec

from monitor.watch.mixture import Increment, Logs

RHOS = (1.5, 2.0, 4.0, 8.0)
LOG_RHOS: Logs = tuple(log(rho) for rho in RHOS)


class Allowance(msgspec.Struct, frozen=True):
    """How often the size may be passed: one_in (events) or a_day; exactly one is given."""

    one_in: float | None = None
    a_day: float | None = None


def increment(allowance: Allowance, events: int, passages: int, days: float) -> Increment:
    """What a slot of `days` says, with this many events and passages."""
    products = tuple(_log_factor(allowance, rho, events, passages, days) for rho in RHOS)
    return Increment(products, tuple(one + log(days) for one in products))


def _log_factor(allowance: Allowance, rho: float, events: int, passages: int, days: float) -> float:
    if allowance.a_day is not None:
        return passages * log(rho) - (rho - 1.0) * allowance.a_day * days
    assert allowance.one_in is not None
    p0 = 1.0 / allowance.one_in
    # A share cannot be raised past one: then the ratio of the largest share below it.
    raised = min(rho * p0, 0.5 * (1.0 + p0))
    return passages * log(raised / p0) + (events - passages) * (log1p(-raised) - log1p(-p0))
