"""The mean of the largest of m events: data below xmin, the fitted law above."""

from __future__ import annotations

from math import exp, log

import numpy as np
from scipy.special import betainc, betaln

from monitor.tail.base_measure import Reach, whole_nodes
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import TailFit
from monitor.tail.whole_law import Floats, log_zeta


def expected_largest(sample: Sample, fit: TailFit, events: int) -> float | None:
    """The mean of the largest of `events` events, in the unit of the sizes; None beyond doubles.

    Requires alpha > 2. With b = (alpha - 2) / (alpha - 1), m events and s the share of the tail, the events above
    xmin give xmin s^(1 - b) m B(m, b) I_s(b, m), which for s = 1 is n xmin B(n, b) (Newman, Contemporary Physics
    46 (2005) 323, section 3.3); the largest lies below xmin with probability (1 - s)^m and then is one of the
    data's sizes.
    """
    above = _above_whole(fit, events) if fit.counting == "whole" else _above_measured(fit, events)
    return None if above is None else float(above + _below(sample, fit, events))


def _above_measured(fit: TailFit, events: int) -> float | None:
    b = (fit.alpha - 2) / (fit.alpha - 1)
    share = fit.share
    inside = float(betainc(b, events, share))
    log_mean = log(fit.xmin) + (1 - b) * log(share) + log(events) + float(betaln(events, b)) + log(inside)
    return exp(log_mean) if log_mean < 709 else None


def _above_whole(fit: TailFit, events: int) -> float | None:
    """xmin P(largest >= xmin) and the sum over the integers x > xmin of P(largest >= x).

    Summed to y = ln(x / xmin) = stop, where P(largest >= x) = m P(size >= x) to 1e-8 and P(size >= x) is a power
    of x to 1e-8; from there on the sum is x P / (alpha - 2).
    """
    alpha, slope = np.array(fit.alpha), fit.alpha - 1
    xmin = float(np.ceil(fit.xmin))  # on the grid fit.xmin is the edge of a cell
    stop = max(log(1e8 * max(events * fit.share, 1.0)) / slope, log(1e8) - log(xmin), 1.0)
    if stop > 300:
        return None
    nodes = whole_nodes(xmin + 1, xmin, Reach(stop, stop, min(0.5, 2 / slope)), 0.25)

    def at_least(y: Floats) -> Floats:
        survival = np.exp(log_zeta(alpha, xmin * np.exp(y)) - log_zeta(alpha, np.array(xmin)))
        out: Floats = -np.expm1(events * np.log1p(-np.minimum(fit.share * survival, 1 - 1e-16)))
        return out

    mean = xmin * float(at_least(np.zeros(1))[0])
    mean += xmin * float(np.sum(np.exp(nodes.log_weight + nodes.y) * at_least(nodes.y)))
    mean += xmin * float(np.exp(stop) * at_least(np.array([stop]))[0]) / (slope - 1)
    return mean


def _below(sample: Sample, fit: TailFit, events: int) -> float:
    """Sum of the data's sizes below xmin times the chance that each is the largest."""
    if fit.start == 0:
        return 0.0
    upto = np.cumsum(sample.counts[: fit.start]) / sample.n
    power = np.exp(events * np.log(upto))
    return float(np.sum(sample.sizes[: fit.start] * np.diff(power, prepend=0.0)))
