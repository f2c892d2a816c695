"""One judgement of one sample: tail, goodness of fit, intervals, rivals, levels and what was assumed.

This is the whole of what `fit` and every refit say. A sample without a tail is an answer too: alpha is None and
`reason` tells why, beside whatever can be said without a law.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import TYPE_CHECKING

from msgspec.structs import replace

from monitor.tail import level
from monitor.tail.empirical import empirical_levels
from monitor.tail.gof import Bootstrap, Cancelled, Interrupted, Progress
from monitor.tail.interval import alpha_at_given_xmin, of_draws
from monitor.tail.judgement import GoodnessOfFit, Interval, Judgement, Options, Rival
from monitor.tail.rivals import compare_rivals
from monitor.tail.sample import Sample
from monitor.tail.scan import law_of, why_no_tail
from monitor.tail.shape import misfit_warning, moment_warnings, shape_warnings
from monitor.tail.tail_fit import Draws, NoTail, TailFit
from monitor.tail.wording import counted, grouped

if TYPE_CHECKING:
    from monitor.tail.laws.law import Law

__all__ = ["Interrupted", "Judged", "compile_everything", "judge", "judge_with_draws"]


MOST_EXACT = 10_000_000
"""A replicate of exact sizes draws every event: of more events than this the sizes go onto the grid first."""


@dataclass(frozen=True, slots=True)
class _Evidence:
    """What the bootstrap found: its answer and the refits that intervals rest on."""

    gof: GoodnessOfFit | None
    draws: Draws | None


@dataclass(frozen=True, slots=True)
class Judged:
    """A judgement, and the refits that its intervals rest on: for a drawing, too many to be kept with it."""

    judgement: Judgement
    draws: Draws | None


def judge(
    sample: Sample,
    options: Options,
    *,
    progress: Callable[[int, int], None] | None = None,
    cancelled: Callable[[], bool] | None = None,
) -> Judgement:
    """Judge the tail of `sample`.

    progress is told (replicates done, budget); it may end early, and starts again if the power law is not plausible
    and the data themselves are resampled. cancelled is asked between chunks of replicates:
    when it says yes, Interrupted is raised. Nothing else is raised for data that can be counted at all.
    """
    return judge_with_draws(sample, options, progress=progress, cancelled=cancelled).judgement


def judge_with_draws(
    sample: Sample,
    options: Options,
    *,
    progress: Callable[[int, int], None] | None = None,
    cancelled: Callable[[], bool] | None = None,
) -> Judged:
    """The same judgement with the bootstrap's refits beside it; no refits without a tail or without replicates."""
    if sample.cells is None and sample.n > MOST_EXACT and why_no_tail(sample, options) is None:
        judged = judge_with_draws(sample.on_grid(), options, progress=progress, cancelled=cancelled)
        said = f"{counted(sample.n)} are more than the {grouped(MOST_EXACT)} that are judged by their exact sizes"
        return Judged(replace(judged.judgement, assumed=(*judged.judgement.assumed, said)), judged.draws)
    refusal = why_no_tail(sample, options)
    if refusal is not None:
        return Judged(_without_tail(sample, options, refusal), None)
    law = law_of(sample, options)
    fit = law.fit()
    if isinstance(fit, NoTail):
        return Judged(_without_tail(sample, options, fit), None)
    evidence = _evidence(law, fit, options, progress, cancelled)
    rivals = compare_rivals(sample, xmin=fit.xmin, alpha=fit.alpha, counting=fit.counting) if options.rivals else ()
    judgement = _with_tail(sample, options, fit, evidence, rivals=rivals, fixed=alpha_at_given_xmin(fit, law))
    return Judged(judgement, evidence.draws)


def _evidence(
    law: Law, fit: TailFit, options: Options, progress: Progress | None, cancelled: Cancelled | None
) -> _Evidence:
    if options.replicates <= 0:
        return _Evidence(None, None)
    bootstrap = Bootstrap(law, fit, options)
    tally = bootstrap.run(progress=progress, cancelled=cancelled)
    gof = bootstrap.answer(tally)
    # Replicates of a law that is not believed say nothing about the spread of the real one.
    draws = tally.draws(fit.n) if gof.plausible else bootstrap.resampled(progress=progress, cancelled=cancelled)
    return _Evidence(gof, draws)


def _with_tail(
    sample: Sample,
    options: Options,
    fit: TailFit,
    evidence: _Evidence,
    *,
    rivals: tuple[Rival, ...],
    fixed: Interval,
) -> Judgement:
    draws, gof = evidence.draws, evidence.gof
    plausible = gof.plausible if gof is not None else None
    alpha_interval = of_draws(draws.alpha) if draws is not None else fixed
    finite = level.finite(alpha_interval)
    return Judgement(
        n=fit.n,
        counting=fit.counting,
        resolution="exact" if sample.cells is None else "grid",
        alpha=fit.alpha,
        alpha_se=fit.alpha_se,
        alpha_interval=alpha_interval,
        alpha_interval_fixed_xmin=fixed,
        xmin=fit.xmin,
        xmin_interval=of_draws(draws.xmin) if draws is not None and fit.chosen else None,
        n_tail=fit.n_tail,
        n_tail_interval=of_draws(draws.n_tail) if draws is not None else None,
        ks_distance=fit.ks_distance,
        gof=gof,
        near_minimum=fit.near_minimum,
        rivals=rivals,
        levels=level.levels(sample, fit, draws, options, rivals, plausible),
        mean_finite=finite.mean,
        variance_finite=finite.variance,
        events_per_day=options.events_per_day,
        limit=level.limit(sample, fit, draws, options),
        largest=level.largest(sample, fit, draws, options, alpha_interval=alpha_interval),
        top_share=level.top_share(fit, draws, alpha_interval=alpha_interval),
        empirical=empirical_levels(sample, options.one_in),
        smallest_size=float(sample.sizes[0]),
        largest_size=float(sample.sizes[-1]),
        assumed=_assumed(sample, options, fit, evidence),
        warnings=(*_fit_warnings(fit, alpha_interval, gof), *shape_warnings(sample, fit.xmin)),
        seed=options.seed,
    )


def _without_tail(sample: Sample, options: Options, refusal: NoTail) -> Judgement:
    usable = sample.sizes.size > 0 and bool(sample.sizes[0] > 0.0)
    return Judgement(
        n=sample.n,
        counting=options.counting,
        resolution="exact" if sample.cells is None else "grid",
        reason=refusal.reason,
        events_per_day=options.events_per_day,
        empirical=empirical_levels(sample, options.one_in) if usable else (),
        smallest_size=float(sample.sizes[0]) if sample.sizes.size else None,
        largest_size=float(sample.sizes[-1]) if sample.sizes.size else None,
        assumed=(_kind(options),),
        warnings=shape_warnings(sample, float(sample.sizes[0])) if usable else (),
        seed=options.seed,
    )


def _kind(options: Options) -> str:
    if options.counting == "whole":
        return "sizes are whole numbers: the discrete power law is fitted"
    return "sizes are measured: the continuous power law is fitted"


def _assumed(sample: Sample, options: Options, fit: TailFit, evidence: _Evidence) -> tuple[str, ...]:
    said = [_kind(options)]
    if sample.cells is not None:
        said.append("sizes are rounded down to a grid of 512 cells per factor of ten, about 0.45 % apart")
    if fit.chosen:
        said.append(f"a tail holds at least {counted(options.min_tail)}; its lower end is the nearest in KS distance")
    elif sample.cells is not None and fit.xmin != options.xmin:
        said.append(f"the lower end of the tail is given, and begins with its cell of the grid at {fit.xmin:.6g}")
    else:
        said.append("the lower end of the tail is given, and taken as known")
    ties = fit.n - sample.sizes.size
    if ties and sample.cells is None and options.counting == "measured":
        said.append(
            f"{ties / fit.n:.1%} of the events repeat the size of another; replicates are not rounded like that, "
            "so that p leans to the low side"
        )
    said.append(_interval_source(evidence.draws, fit.chosen))
    return tuple(said)


def _interval_source(draws: Draws | None, chosen: bool) -> str:
    if draws is None:
        return "no replicates: the interval of alpha takes the lower end of the tail as known"
    if draws.source == "data":
        return (
            f"intervals come from {counted(draws.alpha.size, 'sample')} drawn from the data themselves, since the "
            "power law is not plausible"
        )
    own = ", each choosing its own tail" if chosen else ""
    return f"intervals come from {counted(draws.alpha.size, 'replicate')} of the fitted power law{own}"


def _fit_warnings(fit: TailFit, alpha_interval: Interval, gof: GoodnessOfFit | None) -> list[str]:
    said = list(moment_warnings(fit.alpha, alpha_interval))
    if gof is not None and not gof.plausible:
        slight = misfit_warning(fit.n_tail, fit.ks_distance, gof.p, rule_out=gof.rule_out)
        said.append(
            slight
            or f"a power law is ruled out (p {gof.p:.3g}, at or below {gof.rule_out:g}): it is up to "
            f"{100 * fit.ks_distance:.2g} % of the tail's events off"
        )
    if gof is not None and gof.doubtful:
        low, high = gof.p_interval
        said.append(
            f"doubtful: p could lie on either side of {gof.rule_out:g} ({low:.3f} to {high:.3f} after "
            f"{counted(gof.replicates, 'replicate')})"
        )
    return said


def compile_everything(*, whole: bool = True) -> None:
    """Run every compiled loop once on a small sample, so that no later judgement waits for the compiler.

    The first time on a machine this takes seconds; after that the loops come from the cache on disk. With whole=False
    what only whole sizes need is left until they are judged.
    """
    from monitor.tail.warm import warm

    warm(whole=whole)
