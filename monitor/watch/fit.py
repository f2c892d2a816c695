"""The fit rule: does the tail still have the shape that it had, or that a power law has?

Each group's cv (monitor.watch.groups) gives a two-sided p, uniform while nothing changes; u = -ln p is then Exp(1) and
theta^-1 exp((1 - 1/theta) u) a factor of mean 1 (a p-to-e calibrator: V. Vovk & R. Wang, E-values: calibration,
combination and applications, Annals of Statistics 49 (2021), eq. 1).
"""

from __future__ import annotations

from math import log

from monitor.watch.groups import Ranked
from monitor.watch.mixture import Increment, Logs, idle

LOG_THETAS: Logs = (log(2.0), log(4.0), log(10.0))


def increment(ranked: tuple[Ranked, ...], clock: float) -> Increment:
    """What the groups finished in a slot say; the change may have begun with the slot."""
    if not ranked:
        return idle(len(LOG_THETAS), clock)
    minus_logs = [-log(min(1.0, 2.0 * min(one.cv_low, 1.0 - one.cv_low))) for one in ranked]
    products = tuple(sum(u * (1.0 - 1.0 / theta) - log(theta) for u in minus_logs) for theta in (2.0, 4.0, 10.0))
    return Increment(products, tuple(one + log(clock) for one in products))
