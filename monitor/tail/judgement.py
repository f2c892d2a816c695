"""The result of one judgement of one sample, as frozen records.

Field names are those of the command line's JSON contract, so that a record turned into builtins is
that document. Unbounded or unknowable numbers are None, never NaN or infinity.
"""

from __future__ import annotations

from typing import Any, Literal

import msgspec

Interval = tuple[float | None, float | None]
Counting = Literal["measured", "whole"]


class Options(msgspec.Struct, frozen=True, kw_only=True):
    """How a sample is to be judged.

    counting      'measured' (continuous law) or 'whole' (discrete law; a person's choice, never guessed)
    xmin          a given lower end of the tail, or None to choose it by the smallest KS distance
    min_tail      events a candidate tail must hold
    replicates    budget of the bootstrap; 0 leaves the goodness of fit out
    stop_early    end the bootstrap as soon as p is known to lie on one side of rule_out
    rule_out      p at or below this rules the power law out
    seed          of every random draw, 0 <= seed < 2^53
    one_in        levels wanted: the size passed once in m events, for each m
    limit         the size that must not be passed too often, or None
    period_days   the period the limit is asked for, in days
    limit_at_most passages of the limit held tolerable in one period, or None
    events_per_day  rate of events, or None when there are no times
    rivals        compare with the rival tails
    threads       workers of the bootstrap; results do not depend on it
    """

    counting: Counting = "measured"
    xmin: float | None = None
    min_tail: int = 10
    replicates: int = 2500
    stop_early: bool = True
    rule_out: float = 0.1
    seed: int = 1
    one_in: tuple[int, ...] = (10_000,)
    limit: float | None = None
    period_days: float | None = None
    limit_at_most: float | None = None
    events_per_day: float | None = None
    rivals: bool = True
    threads: int = 1


class GoodnessOfFit(msgspec.Struct, frozen=True, kw_only=True):
    """The bootstrap's answer. p is the share of replicate distances at or above the observed one."""

    p: float
    p_interval: Interval
    replicates: int
    at_least_as_far: int
    stopped: Literal["budget", "decided"]
    rule_out: float
    plausible: bool
    doubtful: bool
    """True when p's interval holds rule_out, so that neither side is settled."""


class NearMinimum(msgspec.Struct, frozen=True):
    """The candidates whose KS distance is within 5 % of the smallest: how well xmin is pinned down."""

    xmin: Interval
    alpha: Interval


class Rival(msgspec.Struct, frozen=True, kw_only=True):
    """One rival tail against the power law, above the same xmin.

    A positive log_likelihood_ratio speaks for the power law. z, p and the ratio are None when the
    rival's fit runs off to the edge of its parameters; favours is then 'not determined'.
    """

    tail: Literal["lognormal", "exponential", "stretched exponential", "power law with cut-off"]
    log_likelihood_ratio: float | None
    z: float | None
    p: float | None
    favours: Literal["power law", "rival", "neither", "not determined"]
    parameters: dict[str, float] = {}
    nested_p: float | None = None
    """Lognormal and stretched exponential hold the power law as a limit: p of the likelihood ratio against it, with
    the power of Vuong's test on half the events or fewer."""


class Level(msgspec.Struct, frozen=True, kw_only=True):
    """The size passed once in `one_in` events. `by_rival` gives a second opinion when the power law is
    not plausible: {'tail': name, 'size': size}. `beyond_data` tells how many times the largest size seen
    it lies at."""

    one_in: int
    size: float | None
    interval: Interval
    beyond_data: float | None = None
    by_rival: dict[str, Any] | None = None


class Limit(msgspec.Struct, frozen=True, kw_only=True):
    """The chance of passing a limit at least once in a period, and the expected number of times."""

    size: float
    period: str
    chance: float
    expected: float
    interval: Interval
    """95 % interval of the chance."""
    at_most: float | None = None
    chance_of_more: float | None = None
    """Chance of passing the limit more often than `at_most` times in the period."""


class Largest(msgspec.Struct, frozen=True, kw_only=True):
    """The largest of `events` events: median (None beyond doubles), mean only where it exists (alpha > 2)."""

    events: int
    median: float | None
    expected: float | None
    interval: Interval


class TopShare(msgspec.Struct, frozen=True, kw_only=True):
    """Share of the tail's total held by its largest `fraction`; None where the mean is infinite."""

    fraction: float
    share: float | None
    interval: Interval


class Judgement(msgspec.Struct, frozen=True, kw_only=True):
    """Everything one sample says about its tail.

    alpha is the exponent of the density, p(x) ~ x^-alpha above xmin; the survival function falls with
    alpha - 1. A sample with no usable tail has alpha None and a `reason` in words.
    """

    n: int
    counting: Counting
    resolution: Literal["exact", "grid"]
    alpha: float | None = None
    reason: str | None = None
    alpha_se: float | None = None
    alpha_interval: Interval | None = None
    alpha_interval_fixed_xmin: Interval | None = None
    xmin: float | None = None
    xmin_interval: Interval | None = None
    n_tail: int | None = None
    n_tail_interval: Interval | None = None
    ks_distance: float | None = None
    gof: GoodnessOfFit | None = None
    near_minimum: NearMinimum | None = None
    rivals: tuple[Rival, ...] = ()
    levels: tuple[Level, ...] = ()
    mean_finite: bool | None = None
    variance_finite: bool | None = None
    """True, False, or None while the interval of alpha holds 2 (mean) or 3 (variance): undecided."""
    events_per_day: float | None = None
    limit: Limit | None = None
    largest: Largest | None = None
    top_share: TopShare | None = None
    empirical: tuple[Level, ...] = ()
    smallest_size: float | None = None
    largest_size: float | None = None
    assumed: tuple[str, ...] = ()
    """What was assumed, in words: kind of sizes, ties, least tail."""
    warnings: tuple[str, ...] = ()
    """What the reader must know, in words: pile-up at the largest size, coarse rounding, infinite mean."""
    seed: int = 1


def as_document(judgement: Judgement) -> dict[str, Any]:
    """The judgement as plain builtins, ready for JSON."""
    document = msgspec.to_builtins(judgement)
    assert isinstance(document, dict)
    return document
