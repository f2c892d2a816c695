"""Phrases that every sentence is built from: chances, levels, alphas, mean and variance."""

from __future__ import annotations

from math import ceil, floor, log1p, log10

from monitor.plan.spans import parse_span
from monitor.render.numbers import (
    at_place,
    bounds_text,
    count_text,
    estimate,
    grouped,
    percent,
    place_of,
    size_text,
    with_bounds,
)
from monitor.render.safe import plain
from monitor.render.times import span_words
from monitor.tail.judgement import GoodnessOfFit, Level, Limit

CAUTION = (
    "Sizes beyond the data are estimates, not guarantees. Plans on which safety depends go by local codes and "
    "licensed practice."
)
FAR_BEYOND = 10.0
"""A level further than this many times beyond the largest size seen is told with a caution."""


def times_in(share: float) -> str:
    """A chance as a count: 0.03 -> '3 times in 100', 0.0021 -> '2 times in 1 000'."""
    if share >= 0.995:
        return "nearly every time"
    for base in (100, 1000, 10_000, 100_000, 1_000_000):
        if share * base >= 0.95:
            times = round(share * base)
            return f"once in {grouped(base)}" if times == 1 else f"{times} times in {grouped(base)}"
    return "less than once in 1 000 000"


def chance_text(p: float) -> str:
    """A chance in two digits; a tiny one as what it is below."""
    if p < 1e-6:
        return "under 0.000001"
    text = at_place(p, floor(log10(p)) - 1)
    return text.rstrip("0").rstrip(".") if "." in text else text


def chance_by_luck(p: float) -> str:
    """How often luck alone would show a difference like this."""
    return f"luck alone would show a difference this large {times_in(p)}"


def size_with_unit(size: float, unit: str) -> str:
    """A size that was read or set: '120 units'."""
    return f"{size_text(size)} {plain(unit)}".rstrip()


def p_text(gof: GoodnessOfFit, *, join: str = "-") -> str:
    """'0.62 (0.58-0.66)'."""
    return with_bounds(gof.p, gof.p_interval, join=join)


def p_words(gof: GoodnessOfFit) -> str:
    """p with its interval and what it means; a large p is good, and that is said."""
    shown = estimate(gof.p, gof.p_interval)
    if gof.at_least_as_far == 0:
        # None of the simulated samples was as far off: all that is known is the upper bound.
        high = gof.p_interval[1] or 1 / max(1, gof.replicates)
        often = f"less than {times_in(ceil(high * 1000) / 1000)}"
        head = f"p 0 (0 to {chance_text(high)})"
    else:
        head, often = f"p {with_bounds(gof.p, gof.p_interval)}", times_in(float(shown) or gof.p)
    if gof.doubtful:
        return (
            f"{head}: doubtful. A true power law would fit this badly {often}; "
            f"that is too near the mark of {gof.rule_out:g} to rule it out or to trust it"
        )
    if gof.plausible:
        return (
            f"{head}: good. A true power law would fit this badly {often}, "
            "so nothing speaks against it (large p is good)"
        )
    only = "" if often.startswith("less") else "only "
    return f"{head}: bad. A true power law would fit this badly {only}{often}"


def fit_word(gof: GoodnessOfFit | None) -> str:
    """One word for a table: does a power law fit?"""
    if gof is None:
        return "untested"
    if gof.doubtful:
        return "doubtful"
    return "good" if gof.plausible else "bad"


def one_in_words(one_in: int) -> str:
    """'one event in 10 000'."""
    return f"one event in {count_text(one_in)}"


def level_words(level: Level, unit: str) -> str:
    """'9 400 units (8 100 to 11 000)'; says so when there is no bound or no value."""
    if level.size is None:
        return "no size can be given"
    text = f"{estimate(level.size, level.interval)} {plain(unit)}"
    if level.interval == (None, None):
        return text
    return f"{text} ({bounds_text(level.size, level.interval)})"


def second_opinion(level: Level, unit: str) -> tuple[str, str] | None:
    """The rival that describes the tail better and the size it gives: ('lognormal', '85 units'); None without one."""
    size = level.by_rival.get("size") if level.by_rival else None
    if level.by_rival is None or level.size is None or not isinstance(size, int | float) or size <= 0:
        return None
    place = min(place_of(level.size, level.interval), place_of(float(size), None) + 1)
    return plain(str(level.by_rival.get("tail", "rival"))), f"{at_place(float(size), place)} {plain(unit)}".rstrip()


def by_rival_words(level: Level, unit: str) -> str:
    """'by the lognormal 85 units'; empty without a second opinion."""
    other = second_opinion(level, unit)
    return f"by the {other[0]} {other[1]}" if other is not None else ""


def beyond_words(level: Level) -> str | None:
    """The caution for a level far beyond the largest size seen, else None."""
    if level.beyond_data is None or level.beyond_data <= FAR_BEYOND:
        return None
    return (
        f"Caution: that is {estimate(level.beyond_data)} times the largest size seen. So far out nothing but the "
        "formula speaks; take it as a warning of size, not as a figure to build on."
    )


def limit_words(limit: Limit, unit: str) -> str:
    """The chance of passing the limit in its period, how often that is expected, and what was held tolerable."""
    return f"limit {size_with_unit(limit.size, unit)}: {passages_words(limit)}; {chance_words(limit)}"


def passages_words(limit: Limit) -> str:
    """'expected to be passed 2.1 times in 30 days, tolerable: 1'."""
    bounds = tuple(None if chance is None or chance >= 1 else -log1p(-chance) for chance in limit.interval)
    times = estimate(limit.expected, bounds)
    text = f"expected to be passed {'once' if times == '1' else f'{times} times'} in {period_words(limit.period)}"
    return text if limit.at_most is None else f"{text} (tolerable: {size_text(limit.at_most)})"


def chance_words(limit: Limit) -> str:
    """'chance of at least one passage 88 % (80 to 94), of more than 1 62 %'."""
    text = f"chance of at least one passage {share_words(limit.chance, limit.interval)}"
    if limit.at_most is not None and limit.chance_of_more is not None:
        text += f", of more than tolerable {percent(limit.chance_of_more)}"
    return text


def period_words(period: str) -> str:
    """'30d' -> '30 days'; what is no span stays as it is."""
    span = parse_span(period)
    return plain(period) if span is None else span_words(span)


def share_words(share: float, interval: tuple[float | None, float | None] | None) -> str:
    """A chance in percent, with the digits its interval allows: '12 % (8 to 17)'."""
    if interval is None or interval == (None, None):
        return percent(share)
    scaled = tuple(None if bound is None else 100 * bound for bound in interval)
    return f"{estimate(100 * share, scaled)} % ({bounds_text(100 * share, scaled)})"


def doubling_words(alpha: float) -> str:
    """What the exponent means: how much rarer twice the size is."""
    return f"twice the size is {at_place(2.0 ** (alpha - 1.0), -1)} times rarer"


def moments_words(mean_finite: bool | None, variance_finite: bool | None) -> str | None:
    """What an infinite mean or variance means for whoever averages; None when both exist."""
    if mean_finite is False:
        return (
            "The mean is infinite (alpha 2 or less): an average of these sizes never settles, however many there are."
        )
    if mean_finite is None and variance_finite is not True:
        return "Whether a mean exists is undecided (the interval of alpha holds 2): do not rely on averages."
    if variance_finite is False:
        return "The variance is infinite (alpha 3 or less): averages settle slowly and a standard deviation never does."
    if variance_finite is None:
        return (
            "Whether a variance exists is undecided (the interval of alpha holds 3): "
            "do not rely on standard deviations."
        )
    return None
