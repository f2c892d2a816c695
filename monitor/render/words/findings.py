"""What needs a person's look, as sentences, the most pressing first."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence
from itertools import takewhile
from typing import Literal

import msgspec

from monitor.render.numbers import at_place, count_text, estimate, exact_at, percent, place_of, size_text
from monitor.render.planned import baseline_level
from monitor.render.safe import plain
from monitor.render.seen import FeedAccount, Refit, Seen, StreamSeen
from monitor.render.times import plural, short_moment
from monitor.render.words.common import (
    beyond_words,
    by_rival_words,
    chance_by_luck,
    chance_words,
    level_words,
    one_in_words,
    p_words,
    passages_words,
    second_opinion,
    size_with_unit,
)
from monitor.tail.judgement import Level, Limit
from monitor.watch.flags import Flag

Kind = Literal["heavier", "limit", "fit", "lighter", "failed", "skipped", "rejected lines"]
ORDER: tuple[Kind, ...] = ("heavier", "limit", "fit", "lighter", "failed", "skipped", "rejected lines")
MANY_REJECTED = 0.1
"""From this share of rejected lines on a feed needs a look: by then its format is likely told wrongly."""


class Finding(msgspec.Struct, frozen=True, kw_only=True):
    """What refits say of a stream: a headline, what it means in sizes, and sentences with the figures behind it.

    refits  the last so many refits in a row say it; 0 where it is no judgement: a refit that failed, a feed
    """

    kind: Kind
    headline: str
    consequence: str = ""
    detail: tuple[str, ...] = ()
    refits: int = 0

    @property
    def sentence(self) -> str:
        """Headline and consequence, without a full stop."""
        return f"{self.headline}; {self.consequence}" if self.consequence else self.headline

    @property
    def rank(self) -> int:
        """Place in the order of what comes first; smaller is more pressing."""
        return ORDER.index(self.kind)


def than_baseline(source: str | None) -> str:
    """What the tail is heavier or lighter than."""
    return "than planned" if source == "plan" else "than its baseline"


def flag_words(flag: Flag, source: str | None, *, doubtful: bool = False) -> str:
    """A finding in a few words, for tables. doubtful: p's interval holds the mark, so that it is not settled."""
    if flag.rule == "fit":
        return "power law in doubt" if doubtful else "power law ruled out"
    return f"{flag.direction or 'different'} than {'planned' if source == 'plan' else 'baseline'}"


def flags_in_words(refit: Refit, source: str | None) -> list[str]:
    """All findings of a refit in a few words each."""
    return [flag_words(flag, source, doubtful=refit.doubtful) for flag in refit.flags]


def run_of(refits: Iterable[Refit], holds: Callable[[Refit], bool]) -> list[Refit]:
    """The last refits in a row that say it, newest first; those without a judgement neither break nor lengthen it."""
    newest_first = (refit for refit in reversed(tuple(refits)) if refit.judgement is not None)
    return list(takewhile(holds, newest_first))


def since_when(refits: Sequence[Refit], run: Sequence[Refit], zone: str, now: int) -> str:
    """'since 12:00 WET, 3 refits in a row', of the run that run_of found."""
    newest_first = [refit for refit in refits if refit.judgement is not None]
    if not run:
        return ""
    when = short_moment(run[-1].end, zone, now)
    if len(run) == 1:
        return f"since the refit of {when}"
    if len(run) == len(newest_first):
        return f"in all of the last {len(run)} refits (at least since {when})"
    return f"since {when}, {len(run)} refits in a row"


def findings(stream: StreamSeen, zone: str, now: int) -> list[Finding]:
    """Everything that refits say of a stream beyond the usual, the most pressing first; empty for a quiet one."""
    found = []
    latest, judged = stream.latest, stream.judged
    if judged is not None:
        if judged.exponent_flag is not None and not stream.accepted:
            found.append(_exponent_finding(stream, judged, judged.exponent_flag, zone, now))
        if judged.fit_flag is not None:
            found.append(_fit_finding(stream, judged, zone, now))
        found += _limit_finding(stream)
    if latest is not None and latest.state in ("failed", "skipped"):
        found.append(_no_result(latest, zone, now))
    return sorted(found, key=lambda finding: finding.rank)


def _exponent_finding(stream: StreamSeen, refit: Refit, flag: Flag, zone: str, now: int) -> Finding:
    source = None if stream.baseline is None else stream.baseline.source
    direction = flag.direction or "lighter"

    def same(other: Refit) -> bool:
        return other.exponent_flag is not None and other.exponent_flag.direction == flag.direction

    run = run_of(stream.refits, same)
    head = f"tail {flag.direction or 'different'} {than_baseline(source)} {since_when(stream.refits, run, zone, now)}"
    return Finding(
        kind=direction,
        refits=len(run),
        headline=head,
        consequence=level_against(stream),
        detail=tuple(text for text in (_alpha_against(stream, refit, flag), *_caution(stream)) if text),
    )


def _alpha_against(stream: StreamSeen, refit: Refit, flag: Flag) -> str:
    """'alpha above 120 units 2.21, planned 2.50 (smaller is heavier); luck alone ...'."""
    against = refit.against
    if against is None or against.alpha_later is None or against.alpha_earlier is None:
        return f"{chance_by_luck(flag.p).capitalize()}."
    # Two standard errors of the exponent at the baseline's xmin say how many digits mean something.
    spread = 2 * (against.alpha_later - 1) / max(1, against.n_later or 1) ** 0.5
    place = place_of(against.alpha_later, (against.alpha_later - spread, against.alpha_later + spread))
    events = f" ({plural(against.n_later, 'event')})" if against.n_later else ""
    return (
        f"Alpha above {size_text(against.xmin)} {plain(stream.plan.unit)}{events} "
        f"{at_place(against.alpha_later, place)}, {planned_or_before(stream)} "
        f"{baseline_alpha(stream, against.alpha_earlier, place)}; "
        f"smaller is heavier; {chance_by_luck(flag.p)}."
    )


def stream_planned(stream: StreamSeen) -> bool:
    """Whether the baseline is a plan from the settings."""
    return stream.baseline is not None and stream.baseline.source == "plan"


def baseline_alpha(stream: StreamSeen, alpha: float, place: int) -> str:
    """The baseline's alpha with the digits of the figure beside it; a planned one with all of its own."""
    return exact_at(alpha, place) if stream_planned(stream) else at_place(alpha, place)


def planned_or_before(stream: StreamSeen) -> str:
    """The word before the baseline's figure."""
    return "planned" if stream_planned(stream) else "baseline"


def level_against(stream: StreamSeen) -> str:
    """'one event in 10 000 now passes 9 400 units, planned 5 200, limit 6 000'; empty without a level."""
    level = stream.level
    if level is None or level.size is None:
        return ""
    place = place_of(level.size, level.interval)
    text = f"{one_in_words(level.one_in)} now passes {at_place(level.size, place)} {plain(stream.plan.unit)}"
    before = baseline_level(stream, level.one_in)
    if before is not None:
        text += f", {planned_or_before(stream)} {at_place(before, place_of(before, _scaled(level, before)))}"
    if stream.plan.limit is not None:
        text += f", limit {size_text(stream.plan.limit)}"
    return text


def _scaled(level: Level, size: float) -> tuple[float | None, ...]:
    """The level's interval moved to another size: a baseline is shown with as many digits as what it stands beside."""
    assert level.size is not None
    return tuple(None if bound is None else bound * size / level.size for bound in level.interval)


def _caution(stream: StreamSeen) -> list[str]:
    caution = None if stream.level is None else beyond_words(stream.level)
    return [caution] if caution else []


def _fit_finding(stream: StreamSeen, refit: Refit, zone: str, now: int) -> Finding:
    assert refit.judgement is not None
    run = run_of(stream.refits, lambda other: other.fit_flag is not None)
    since = since_when(stream.refits, run, zone, now)
    better = [rival.tail for rival in refit.judgement.rivals if rival.favours == "rival"]
    detail = []
    if refit.judgement.gof is not None:
        detail.append(f"{p_words(refit.judgement.gof)}.")
    if better:
        detail.append(f"Better described by: {', '.join(better)}. Sizes read off the power law are in doubt.")
    else:
        detail.append("No rival describes it clearly better. Sizes read off the power law are in doubt.")
    verb = "it is doubtful whether a power law describes" if refit.doubtful else "a power law does not describe"
    return Finding(
        kind="fit", headline=f"{verb} the tail, {since}", consequence=_by_rival(stream), detail=tuple(detail),
        refits=len(run),
    )  # fmt: skip


def _by_rival(stream: StreamSeen) -> str:
    """'by the lognormal one event in 10 000 passes 85 units, not 2 400'; empty without a second opinion."""
    level = stream.level
    other = None if level is None else second_opinion(level, stream.plan.unit)
    if level is None or level.size is None or other is None:
        return ""
    power_law = estimate(level.size, level.interval)
    return f"by the {other[0]} {one_in_words(level.one_in)} passes {other[1]}, not {power_law}"


def _limit_finding(stream: StreamSeen) -> list[Finding]:
    judgement = stream.judgement
    limit = None if judgement is None else judgement.limit
    if limit is None or not _passed_too_often(limit):
        return []
    run = run_of(stream.refits, lambda other: other.judgement is not None and _passed_too_often(other.judgement.limit))
    text = f"limit {size_with_unit(limit.size, stream.plan.unit)} {passages_words(limit)}"
    return [Finding(kind="limit", headline=text, detail=(f"{chance_words(limit).capitalize()}.",), refits=len(run))]


def _passed_too_often(limit: Limit | None) -> bool:
    return limit is not None and limit.at_most is not None and limit.expected > limit.at_most


def _no_result(refit: Refit, zone: str, now: int) -> Finding:
    word = "failed" if refit.state == "failed" else "was skipped"
    reason = f": {refit.reason}" if refit.reason else ""
    text = f"the refit of {short_moment(refit.end, zone, now)} {word}{reason}"
    return Finding(kind="failed" if refit.state == "failed" else "skipped", headline=text)


def feed_findings(seen: Seen) -> list[tuple[FeedAccount, Finding]]:
    """Feeds of which so many lines cannot be used that somebody must look."""
    found = []
    for feed in seen.feeds:
        if feed.lines and feed.rejected_lines >= MANY_REJECTED * feed.lines:
            found.append((feed, Finding(kind="rejected lines", headline=rejected_words(feed))))
    return found


def rejected_words(feed: FeedAccount) -> str:
    """'30 of 100 lines (30 %) rejected: 20 not JSON, 10 zero'."""
    if not feed.rejected_lines:
        return f"no line rejected of {count_text(feed.lines)}"
    reasons = ", ".join(f"{count_text(number)} {reason}" for reason, number in feed.rejected.items())
    share = percent(feed.rejected_lines / feed.lines) if feed.lines else "0 %"
    return f"{count_text(feed.rejected_lines)} of {plural(feed.lines, 'line')} ({share}) rejected: {reasons}"


def quiet_words(stream: StreamSeen, zone: str, now: int) -> str:
    """Why a stream without findings has no figures to show; empty when it has some."""
    latest = stream.latest
    if latest is None:
        waiting = f", {plural(stream.waiting, 'window')} waiting to be judged" if stream.waiting else ""
        return f"not judged yet: {plural(stream.state.events, 'event')} so far{waiting}"
    judged = stream.judgement
    if judged is not None and judged.alpha is None:
        return f"no tail to judge yet: {judged.reason or 'too few events'}"
    return "" if judged is not None else f"no judgement stored up to {short_moment(latest.end, zone, now)}"


def level_line(stream: StreamSeen) -> str:
    """The level with its interval against baseline and limit, a full sentence; empty without a level."""
    level = stream.level
    if level is None or level.size is None:
        return ""
    text = f"One event in {count_text(level.one_in)} passes {level_words(level, stream.plan.unit)}"
    before = baseline_level(stream, level.one_in)
    if before is not None:
        text += f", {planned_or_before(stream)} {at_place(before, place_of(before, _scaled(level, before)))}"
    if stream.plan.limit is not None:
        text += f", limit {size_text(stream.plan.limit)}"
    rival = by_rival_words(level, stream.plan.unit)
    return f"{text}; {rival}." if rival else f"{text}."
