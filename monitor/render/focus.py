"""One stream looked at closely: its sentences, its tail drawn, its last refits, its rejected lines."""

from __future__ import annotations

import msgspec
from rich.text import Text

from monitor.render.charts import TailDrawing, chart_legend, tail_chart
from monitor.render.frame import ABNORMAL, STRONG, Look, Part, cut_to, head_line, paragraph, styled
from monitor.render.numbers import count_text, place_of, size_text, with_bounds
from monitor.render.seen import FeedAccount, Seen, StreamSeen
from monitor.render.stream_rows import Sorted, age_text, state_word
from monitor.render.tables import RefitRow, history_table
from monitor.render.times import plural
from monitor.render.words.common import moments_words, p_words, size_with_unit
from monitor.render.words.findings import (
    baseline_alpha,
    findings,
    level_line,
    planned_or_before,
    quiet_words,
    rejected_words,
)
from storage.facts import RejectedSample

KEYS = "Left, Right: other streams   Esc: back   h: help   q: quit"
LEAST_CHART = 8
"""Lines below which the drawing is left out."""
CHART = 24
"""Lines above which it gives room to the refits."""
LEAST_REFITS = 2


class Focused(msgspec.Struct, frozen=True, kw_only=True):
    """All that the page of one stream shows."""

    stream: StreamSeen
    feed: FeedAccount | None
    drawing: TailDrawing | None
    samples: tuple[RejectedSample, ...]


def focus_page(
    focused: Focused, seen: Seen, now: int, look: Look, *, notice: str | None = None, live: bool = False
) -> list[Text]:
    """The page as lines: exactly look.height of them when live, else at most so many.

    Sentences come first and take somewhat less than half of the height, then the drawing; the last refits get
    the rest.
    """
    zone = seen.plan.timezone
    foot = [styled(look, Part(KEYS))] if live else []
    head = [head_line(look, f"{focused.stream.name}  ({seen.store})", now, zone)]
    head += paragraph(look, notice, style=ABNORMAL) if notice else []
    room = look.height - len(head) - len(foot)
    said = _sentences(focused, now, look, zone)
    most = max(4, room * 9 // 20)
    said = said if len(said) <= most else _shortened(said, most, look)
    room -= len(said)
    refits = _refit_lines(focused, look, zone)
    # Drawing first in importance: it gets what a handful of refits leaves, and not more than it can use.
    for_refits = min(len(refits), max(LEAST_REFITS + 1, room - CHART))
    chart = _drawing(focused, msgspec.structs.replace(look, height=room - for_refits))
    refits = [*refits[:1], *refits[max(1, len(refits) - max(0, room - len(chart) - 1)) :]][: room - len(chart)]
    rest = room - len(chart) - len(refits)
    lines = [*head, *said, *chart, *refits, *_rejected(focused, look)[: max(0, rest)]]
    return cut_to(look, lines, foot) if live else lines[: look.height]


def _shortened(lines: list[Text], room: int, look: Look) -> list[Text]:
    """As many lines as fit, and how many are missing."""
    hidden = len(lines) - room + 1
    return [*lines[: room - 1], styled(look, Part(f"  ({plural(hidden, 'more line')} in a taller terminal)"))]


def _sentences(focused: Focused, now: int, look: Look, zone: str) -> list[Text]:
    """Headlines, then the figures, then what is behind the findings: the lower a terminal, the less of the last."""
    stream = focused.stream
    found = findings(stream, zone, now)
    lines: list[Text] = []
    for finding in found:
        lines += paragraph(look, f"{_capital(finding.headline)}.", style=ABNORMAL, indent="  ", first="")
    if not found:
        words = quiet_words(stream, zone, now) or _steady_words(stream)
        lines += paragraph(look, f"{_capital(words)}.", style=STRONG)
    behind = [text for finding in found if finding.kind != "fit" for text in finding.detail]
    behind += [text for finding in found if finding.kind == "fit" for text in finding.detail[1:]]
    for text in [*_figures(stream, now), *behind, *_moments(stream)]:
        lines += paragraph(look, text, indent="  ", first="")
    return lines


def _steady_words(stream: StreamSeen) -> str:
    word = state_word(Sorted(stream=stream, findings=()))
    if stream.baseline is None:
        return f"{word}: nothing to compare with yet"
    return f"{word}: the tail is as {'planned' if stream.baseline.source == 'plan' else 'its baseline'}"


def _figures(stream: StreamSeen, now: int) -> list[str]:
    """The figures in sentences: alpha, p, level, events."""
    judged, state = stream.judgement, stream.state
    lines = []
    if judged is not None and judged.alpha is not None:
        lines.append(_alpha_line(stream))
        if judged.gof is not None:
            lines.append(f"{p_words(judged.gof)}.")
        lines += [line for line in [level_line(stream)] if line]
    lines.append(
        f"{plural(state.events, 'event')}, {count_text(state.late)} late, {count_text(stream.open_events)} in the open "
        f"pane; newest {age_text(stream, now)} {'ago' if now >= state.newest else 'of the clock'}."
    )
    return lines


def _moments(stream: StreamSeen) -> list[str]:
    judged = stream.judgement
    words = (
        None if judged is None or judged.alpha is None else moments_words(judged.mean_finite, judged.variance_finite)
    )
    return [words] if words else []


def _alpha_line(stream: StreamSeen) -> str:
    """'Alpha 2.21 (2.15 to 2.27), planned 2.50; the tail starts at 120 units and holds 2 310 of 20 480 events.'"""
    judged = stream.judgement
    assert judged is not None
    assert judged.alpha is not None
    text = f"Alpha {with_bounds(judged.alpha, judged.alpha_interval)}"
    base = stream.baseline
    if base is not None:
        planned = baseline_alpha(stream, base.alpha, place_of(judged.alpha, judged.alpha_interval))
        text += f", {planned_or_before(stream)} {planned}"
        if base.xmin != judged.xmin:
            text += f" (from {size_text(base.xmin)} on)"
    if judged.xmin is not None and judged.n_tail is not None:
        text += f"; the tail starts at {size_with_unit(judged.xmin, stream.plan.unit)}"
        near = judged.near_minimum
        if near is not None and near.xmin[0] is not None and near.xmin[1] is not None and near.xmin[0] < near.xmin[1]:
            text += f" (as good from {size_text(near.xmin[0])} to {size_text(near.xmin[1])})"
        text += f" and holds {count_text(judged.n_tail)} of {plural(judged.n, 'event')}"
    return f"{text}."


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def _drawing(focused: Focused, look: Look) -> list[Text]:
    if focused.drawing is None or look.height < LEAST_CHART:
        return []
    chart = tail_chart(focused.drawing, look.width, look.height - 1, ascii_only=look.ascii_only)
    if not chart:
        return []
    legend = chart_legend(focused.drawing, ascii_only=look.ascii_only)
    return [styled(look, Part(legend)), *(styled(look, Part(line)) for line in chart)]


def _refit_lines(focused: Focused, look: Look, zone: str) -> list[Text]:
    stream = focused.stream
    rows = [RefitRow(refit=refit, unit=stream.plan.unit, baseline=stream.baseline) for refit in stream.refits]
    if not rows:
        return []
    table = history_table(rows, zone, look.width, one_stream=True)
    flagged = ["", *(refit.state != "done" or bool(refit.flags) for refit in stream.refits)]
    return [styled(look, Part(line, ABNORMAL if bad else "")) for line, bad in zip(table, flagged, strict=True)]


def _rejected(focused: Focused, look: Look) -> list[Text]:
    """What of the stream's feed could not be used, with the last of the lines kept."""
    if focused.feed is None:
        return []
    lines = [styled(look, Part(f"Feed {focused.feed.feed}: {rejected_words(focused.feed)}."))]
    for sample in focused.samples:
        text = sample.text.decode("utf-8", "backslashreplace")
        lines.append(styled(look, Part(f"  {sample.reason}, {sample.chain} at byte {sample.position}: {text}")))
    return lines
