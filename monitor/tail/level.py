"""What a fitted tail means in sizes: levels, the chance of passing a limit, the largest of m events, the top share.

Levels are return levels: ln x_m = ln xmin + ln(m share) / (alpha - 1), share = n_tail / n, the semi-parametric
form of Coles, An Introduction to Statistical Modeling of Extreme Values (2001), equation 4.13 with xi = 1 / (alpha - 1)
and sigma = xi xmin. All intervals are 95 %: order statistics of the bootstrap replicates (10 and 391 of 400) or,
without replicates, the delta method on the logarithm at a fixed xmin.
"""

from __future__ import annotations

from math import expm1, floor, log, sqrt
from typing import Any

import msgspec
import numpy as np
from scipy.special import pdtrc

from monitor.tail.empirical import beyond_data, empirical_interval, empirical_size, share_above
from monitor.tail.judgement import Interval, Largest, Level, Limit, Options, Rival, TopShare
from monitor.tail.largest import expected_largest
from monitor.tail.rivals import best_rival, rival_size
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import Draws, TailFit
from monitor.tail.tails import Floats, Tails, order_limits, size_of
from monitor.tail.top_share import top_share_of

_Z = 1.959963984540054  # 97.5 % point of the normal distribution
_WIDEST = 700.0  # half an interval of a logarithm: beyond, doubles end
TOP_FRACTION = 0.2


class Finite(msgspec.Struct, frozen=True):
    """Do the mean and the variance of the tail exist? None while the interval of alpha leaves it open."""

    mean: bool | None
    variance: bool | None


def finite(alpha_interval: Interval | None) -> Finite:
    """Whether mean (alpha > 2) and variance (alpha > 3) exist, by the interval of alpha."""
    low, high = (None, None) if alpha_interval is None else alpha_interval

    def beyond(bound: float) -> bool | None:
        if low is not None and low > bound:
            return True
        return False if high is not None and high <= bound else None

    return Finite(beyond(2.0), beyond(3.0))


def levels(
    sample: Sample,
    fit: TailFit,
    draws: Draws | None,
    options: Options,
    rivals: tuple[Rival, ...],
    plausible: bool | None,
) -> tuple[Level, ...]:
    """The size passed once in m events, for each m of options.one_in, by the power law.

    Below the tail (m share < 1) the sample's own quantile with its exact interval. A size that doubles cannot
    hold is None. When `plausible` is False the best rival's size stands beside it.
    """
    rival = best_rival(rivals) if plausible is False else None
    return tuple(_level(sample, fit, draws, events, rival=rival) for events in options.one_in)


def _level(sample: Sample, fit: TailFit, draws: Draws | None, events: int, *, rival: Rival | None) -> Level:
    size, interval = _size_passed(sample, fit, draws, 1 / events)
    second: dict[str, Any] | None = None
    if rival is not None and events * fit.share >= 1:
        by_rival = rival_size(rival, sample, fit.xmin, fit.n_tail, events, counting=fit.counting)
        second = None if by_rival is None else {"tail": rival.tail, "size": by_rival}
    return Level(one_in=events, size=size, interval=interval, beyond_data=beyond_data(size, sample), by_rival=second)


def _size_passed(sample: Sample, fit: TailFit, draws: Draws | None, chance: float) -> tuple[float | None, Interval]:
    """The size passed with probability `chance`, and its interval."""
    log_size = float(Tails.of_fit(fit).log_size(chance)[0])
    if np.isnan(log_size):
        return empirical_size(sample, chance), empirical_interval(sample, chance)
    if draws is None or len(draws.alpha) < 39:
        slope = fit.alpha - 1
        reach = log(fit.share / chance)
        half = _Z * sqrt((reach * fit.alpha_se / slope**2) ** 2 + _share_variance(fit) / slope**2)
        ends: Interval = (log_size - half, log_size + half)
    else:
        values = Tails.of_draws(draws, fit.counting).log_size(chance)
        ends = order_limits(values, missing=_logs(empirical_interval(sample, chance)))
    low, high = (size_of(end, fit.counting) for end in ends)
    return size_of(log_size, fit.counting), (low, high)


def _share_variance(fit: TailFit) -> float:
    """Variance of the logarithm of the tail's share, binomial."""
    return (1 - fit.share) / fit.n_tail


def _logs(interval: Interval) -> Interval:
    low, high = interval
    return (None if low is None else log(low)), (None if high is None else log(high))


def limit(sample: Sample, fit: TailFit, draws: Draws | None, options: Options) -> Limit | None:
    """How often options.limit is passed in options.period_days, at options.events_per_day.

    expected = events in the period times the chance that one passes the limit; chance of at least one passage
    1 - exp(-expected), of more than options.limit_at_most by the Poisson law: the events are taken as independent and
    their rate as known. A limit below xmin is judged by the sample's own share. None when the limit, the
    period or the rate is missing.
    """
    if options.limit is None or options.period_days is None or options.events_per_day is None:
        return None
    events = options.events_per_day * options.period_days
    one, interval = _chance_of_passing(sample, fit, draws, options.limit)
    expected = events * one
    at_most = options.limit_at_most
    more = None if at_most is None else float(pdtrc(max(floor(at_most), 0), expected))
    low, high = (None if end is None else -expm1(-events * end) for end in interval)
    return Limit(
        size=options.limit,
        period=period_text(options.period_days),
        chance=-expm1(-expected),
        expected=expected,
        interval=(low, high),
        at_most=at_most,
        chance_of_more=more,
    )


def _chance_of_passing(sample: Sample, fit: TailFit, draws: Draws | None, size: float) -> tuple[float, Interval]:
    """Probability that one event passes `size`, and its interval."""
    seen = share_above(sample, size)
    one = float(Tails.of_fit(fit).chance(size)[0])
    if np.isnan(one):
        return seen.share, (seen.low, seen.high)
    if draws is None or len(draws.alpha) < 39:
        half = _Z * sqrt(((log(size) - log(fit.xmin)) * fit.alpha_se) ** 2 + _share_variance(fit))
        half = min(half, _WIDEST)
        return one, (one * float(np.exp(-half)), min(one * float(np.exp(half)), 1.0))
    values = Tails.of_draws(draws, fit.counting).chance(size)
    return one, order_limits(values, missing=(seen.low, seen.high))


def period_text(days: float) -> str:
    """A period in the unit that suits it: '30d', '12h', '15m', '20s'."""
    for name, per_day in (("d", 1), ("h", 24), ("m", 1440)):
        if days * per_day >= 1:
            return f"{days * per_day:.6g}{name}"
    return f"{days * 86400:.6g}s"


def largest(
    sample: Sample, fit: TailFit, draws: Draws | None, options: Options, *, alpha_interval: Interval | None
) -> Largest:
    """The largest of m = options.one_in[-1] events: its median, and its mean where that exists (alpha > 2).

    The median is the size passed with probability 1 - 2^(-1/m) by one event, which is about
    xmin (m share / ln 2)^(1 / (alpha - 1)); None beyond doubles. interval is that of the median; its upper end is
    None where the interval of alpha reaches 2: there the mean of the largest may be infinite, and no figure is an
    upper bound to plan on.
    """
    events = options.one_in[-1]
    chance = -expm1(-log(2) / events)
    size, interval = _size_passed(sample, fit, draws, chance)
    low, high = interval
    alpha_low = fit.alpha if alpha_interval is None else alpha_interval[0]
    if alpha_low is None or alpha_low <= 2:
        high = None
    expected = expected_largest(sample, fit, events) if fit.alpha > 2 else None
    return Largest(events=events, median=size, expected=expected, interval=(low, high))


def top_share(fit: TailFit, draws: Draws | None, *, alpha_interval: Interval | None) -> TopShare:
    """The share of the tail's total that its largest 20 % hold: W = P^((alpha - 2) / (alpha - 1)).

    Source: Newman, Contemporary Physics 46 (2005) 323, equation 28; whole sizes by sums. None where the mean is
    infinite (alpha <= 2): a handful of events then holds nearly all. The upper end is None where alpha's interval
    reaches 2.
    """
    if fit.alpha <= 2:
        return TopShare(fraction=TOP_FRACTION, share=None, interval=(None, None))
    share = top_share_of(np.array([fit.alpha]), np.array([fit.xmin]), TOP_FRACTION, fit.counting)
    interval: Interval
    if draws is None or len(draws.alpha) < 39:
        ends = (None, None) if alpha_interval is None else alpha_interval
        heavy, light = ends
        interval = _share_at(light, fit), _share_at(heavy, fit)
    else:
        interval = _share_limits(draws, fit)
    return TopShare(fraction=TOP_FRACTION, share=float(share[0]), interval=interval)


def _share_at(alpha: float | None, fit: TailFit) -> float | None:
    if alpha is None or alpha <= 2:
        return None
    return float(top_share_of(np.array([alpha]), np.array([fit.xmin]), TOP_FRACTION, fit.counting)[0])


def _share_limits(draws: Draws, fit: TailFit) -> Interval:
    """Limits from the replicates; one without a mean counts as share 1, and leaves that end open."""
    exists = draws.alpha > 2
    shares: Floats = np.ones(len(draws.alpha))
    shares[exists] = top_share_of(draws.alpha[exists], draws.xmin[exists], TOP_FRACTION, fit.counting)
    low, high = order_limits(shares)
    return (None if low is None or low >= 1 else low), (None if high is None or high >= 1 else high)
