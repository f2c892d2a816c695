"""One judgement in sentences: what `tailgauge fit` prints, and what the screen tells of one stream."""

from __future__ import annotations

from monitor.render.numbers import (
    at_place,
    bounds_text,
    count_text,
    estimate,
    percent,
    place_of,
    size_text,
    with_bounds,
)
from monitor.render.safe import plain
from monitor.render.times import plural
from monitor.render.words.common import (
    CAUTION,
    beyond_words,
    by_rival_words,
    chance_text,
    doubling_words,
    level_words,
    limit_words,
    moments_words,
    one_in_words,
    p_words,
    share_words,
    size_with_unit,
)
from monitor.tail.judgement import Judgement, Level, Rival


def fit_sentences(judgement: Judgement, unit: str) -> list[str]:
    """The judgement in sentences: the verdict first, then alpha, xmin, p, rivals, levels, warnings, caution.

    Parameters: unit, of the sizes; may be empty. Each entry is one line without its line end, harmless to a
    terminal; a sample with no usable tail gives the reason first.
    """
    if judgement.alpha is None:
        lines = [no_tail_words(judgement), *_empirical(judgement, unit)]
    else:
        lines = [
            verdict_words(judgement, unit),
            alpha_sentence(judgement),
            xmin_sentence(judgement, unit),
            *_fit_quality(judgement),
            *(rival_words(rival) for rival in judgement.rivals),
            *_levels(judgement, unit),
            *_empirical(judgement, unit),
        ]
    if judgement.limit is not None:
        lines.append(_sentence(limit_words(judgement.limit, unit)))
    lines += _largest(judgement, unit)
    lines += _moments(judgement)
    lines += [_sentence(f"note: {warning}") for warning in judgement.warnings]
    lines += [_sentence(f"assumed: {assumed}") for assumed in judgement.assumed]
    if judgement.levels or judgement.limit is not None:
        lines.append(CAUTION)
    return [plain(line) for line in lines]


def _sentence(text: str) -> str:
    # The name of a figure stays as it is written everywhere else.
    text = text if text.startswith("p ") else text[:1].upper() + text[1:]
    return text if text.endswith((".", "!", "?")) else text + "."


def no_tail_words(judgement: Judgement) -> str:
    """Why there is no tail to speak of."""
    reason = judgement.reason or "no reason was stored"
    return _sentence(f"no usable tail among {plural(judgement.n, 'event')}: {reason}")


def verdict_words(judgement: Judgement, unit: str) -> str:
    """First line: is a power law a fair description, and of which events?"""
    assert judgement.xmin is not None
    assert judgement.n_tail is not None
    which = f"the largest {count_text(judgement.n_tail)} of {plural(judgement.n, 'event')}"
    which += f" ({size_with_unit(judgement.xmin, unit)} and more)"
    gof = judgement.gof
    if gof is None:
        return f"A power law was fitted to {which}; whether it fits well was not tested."
    if gof.doubtful:
        return f"It is doubtful whether a power law describes {which}."
    if gof.plausible:
        return f"A power law is a fair description of {which}."
    return f"A power law does not describe {which}: it is ruled out."


def alpha_sentence(judgement: Judgement) -> str:
    """alpha with its interval and what it means."""
    assert judgement.alpha is not None
    text = f"alpha {with_bounds(judgement.alpha, judgement.alpha_interval)}"
    if judgement.alpha_interval is not None:
        text += " at 95 %"
    se = "" if judgement.alpha_se is None else f", standard error {estimate(judgement.alpha_se)} at this xmin"
    return f"{text}{se}: the smaller, the heavier the tail; here {doubling_words(judgement.alpha)}."


def xmin_sentence(judgement: Judgement, unit: str) -> str:
    """Where the tail starts, and how well that is pinned down."""
    assert judgement.xmin is not None
    text = f"xmin {size_with_unit(judgement.xmin, unit)}: the tail starts here"
    near = judgement.near_minimum
    if near is not None and near.xmin[0] != near.xmin[1] and None not in (*near.xmin, *near.alpha):
        low, high = near.xmin
        assert low is not None
        assert high is not None
        text += f"; as good from {size_text(low)} to {size_text(high)}"
        place = place_of(judgement.alpha or 0.0, judgement.alpha_interval)
        ends = [at_place(alpha, place) for alpha in near.alpha if alpha is not None]
        text += f" (alpha {ends[0]} throughout)" if ends[0] == ends[1] else f" (alpha {ends[0]} to {ends[1]})"
    return text + "."


def _fit_quality(judgement: Judgement) -> list[str]:
    lines = []
    if judgement.gof is not None:
        gof = judgement.gof
        samples = plural(gof.replicates, "simulated sample")
        how = f"From {samples}" if gof.stopped == "budget" else f"{samples} were enough to decide"
        lines.append(f"{p_words(gof)}. {how}.")
    if judgement.ks_distance is not None:
        lines.append(
            f"Data and fit differ by at most {estimate(judgement.ks_distance)} in share of tail events "
            "(ks_distance, Kolmogorov-Smirnov)."
        )
    return lines


def rival_words(rival: Rival) -> str:
    """One rival tail against the power law, in a sentence."""
    name = {"power law with cut-off": "power law with an exponential cut-off"}.get(rival.tail, rival.tail)
    article = "an" if name[0] in "aeiou" else "a"
    head = f"Against {article} {name}: "
    if rival.favours == "not determined" or rival.log_likelihood_ratio is None:
        return head + "not determined (its fit runs off to the edge of its range)."
    figures = f"log-likelihood ratio {estimate(rival.log_likelihood_ratio)}"
    figures += "" if rival.p is None else f", p {chance_text(rival.p)}"
    verdict = {
        "power law": "the power law describes the tail better",
        "rival": f"the {name} describes the tail better",
        "neither": "the data cannot tell them apart",
    }[rival.favours]
    return f"{head}{verdict} ({figures})."


def rival_verdict(rival: Rival) -> str:
    """The same in a few words, beside the rival's name: 'fits worse, p 0.02'."""
    words = {
        "power law": "fits worse",
        "rival": "fits better",
        "neither": "cannot be told apart",
        "not determined": "not determined",
    }[rival.favours]
    return words if rival.p is None else f"{words}, p {chance_text(rival.p)}"


def _moments(judgement: Judgement) -> list[str]:
    # The judgement's own warnings say it with the figures; saying it twice helps nobody.
    if judgement.alpha is None or any("infinite" in warning for warning in judgement.warnings):
        return []
    words = moments_words(judgement.mean_finite, judgement.variance_finite)
    return [words] if words else []


def _largest(judgement: Judgement, unit: str) -> list[str]:
    lines = []
    largest, top = judgement.largest, judgement.top_share
    if largest is not None and largest.median is not None:
        low, high = largest.interval
        text = f"the largest of {count_text(largest.events)} events is as likely above as below "
        text += f"{estimate(largest.median, largest.interval)} {plain(unit)}".rstrip()
        if low is not None or high is not None:
            text += f" ({bounds_text(largest.median, largest.interval)})"
        lines.append(_sentence(text))
    if top is not None and top.share is not None:
        held = share_words(top.share, top.interval)
        lines.append(_sentence(f"the largest {percent(top.fraction)} of the tail's events hold {held} of its total"))
    return lines


def _levels(judgement: Judgement, unit: str) -> list[str]:
    lines = []
    for level in judgement.levels:
        lines.append(_level_sentence(level, unit))
        caution = beyond_words(level)
        lines += [caution] if caution else []
    return lines


def _level_sentence(level: Level, unit: str) -> str:
    if level.size is None:
        return f"No size can be given that {one_in_words(level.one_in)} passes."
    text = f"{one_in_words(level.one_in)} passes {level_words(level, unit)}"
    rival = by_rival_words(level, unit)
    text += f"; {rival}" if rival else ""
    return _sentence(text)


def _empirical(judgement: Judgement, unit: str) -> list[str]:
    return [
        _sentence(f"counted from the data alone, {one_in_words(level.one_in)} passes {level_words(level, unit)}")
        for level in judgement.empirical
        if level.size is not None
    ]
