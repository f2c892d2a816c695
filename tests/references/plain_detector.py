"""The detector one event at a time, in plain floats, straight from the definitions: slow and obvious.

Second implementation for monitor.watch.exponent, tail_share and mixture.
"""

from __future__ import annotations

from math import exp, log


def exponent_ratios(values, n, total, thetas):
    """For each value the likelihood ratios of its self-starting score, one for each theta; and n and total after."""
    out = []
    for y in values:
        z = n * log(1.0 + y / total) if n else None
        out.append([1.0 if z is None else exp((1.0 - 1.0 / theta) * z) / theta for theta in thetas])
        n, total = n + 1, total + y
    return out, n, total


def slot_by_starts(ratios, clock, starts):
    """(P, Q) of a slot for one theta: product of all ratios; clock times the mean of the products from each start."""
    product = 1.0
    for one in ratios:
        product *= one
    after = []
    for start in starts:
        rest = 1.0
        for one in ratios[start:]:
            rest *= one
        after.append(rest)
    return product, clock * sum(after) / len(after)


def share_martingale(events, past_n, past_total, open_gap, theta):
    """The evidence after each of `events` (True: an exceedance): finished ratios times the open gap's expectation.

    Returns its values, the first one before any event, with the open gap at the start counted in.
    """
    slope = 1.0 - 1.0 / theta
    finished, gap, n, total = 1.0, open_gap, past_n, past_total
    out = [exp(slope * n * log(1.0 + gap / total)) if n else 1.0]
    for event in events:
        gap += 1
        if event:
            if n:
                finished *= exp(slope * n * log(1.0 + (gap - 0.5) / total)) / theta
            n, total, gap = n + 1, total + gap - 0.5, 0
        out.append(finished * (exp(slope * n * log(1.0 + gap / total)) if n else 1.0))
    return out
