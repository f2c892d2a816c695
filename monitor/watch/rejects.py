"""The rejects rule: are more lines unusable than there used to be?

A slot with lines is "bad" when its share of rejected lines is above the baseline's 99 % quantile. With k of the
baseline's m slots bad, the next one is bad with chance at most (k + 1)/(m + 1) if it is like them (exchangeable; on
average over baselines, so the bound is as good as the baseline is long), and the factor is
E = rho^bad ((1 - rho p0)/(1 - p0))^(1 - bad), p0 that chance. Slots without lines say nothing.
"""

from __future__ import annotations

from math import exp, log, log1p

import msgspec
import numpy as np

from monitor.watch.mixture import Increment, Logs, idle

LOG_RHOS: Logs = (log(3.0), log(10.0), log(30.0))


class UsualRejects(msgspec.Struct, frozen=True):
    """share: the quantile above which a slot is bad; chance: of a bad slot while nothing has changed."""

    share: float
    chance: float


def usual(shares: tuple[float, ...]) -> UsualRejects | None:
    """The baseline's quantile from its slots' shares of rejected lines; None without a slot."""
    if not shares:
        return None
    limit = float(np.quantile(np.array(shares), 0.99, method="higher"))
    return UsualRejects(limit, (sum(share > limit for share in shares) + 1) / (len(shares) + 1))


def increment(state: UsualRejects, lines: int, rejected: int, clock: float) -> Increment:
    """What a slot with this many lines says."""
    if not lines:
        return idle(len(LOG_RHOS), clock)
    bad = rejected > state.share * lines
    products = []
    for log_rho in LOG_RHOS:
        raised = min(state.chance * exp(log_rho), 0.5 * (1.0 + state.chance))
        products.append(log(raised / state.chance) if bad else log1p(-raised) - log1p(-state.chance))
    return Increment(tuple(products), tuple(one + log(clock) for one in products))
