"""One stream looked at closely: its sentences, its tail drawn, its last refits, its watch, its rejected lines."""

from __future__ import annotations

from typing import Literal

import msgspec
from rich.text import Text

from monitor.render.attention import Sorted, sorted_stream
from monitor.render.charts import TailDrawing, chart_legend, tail_chart
from monitor.render.frame import ABNORMAL, STRONG, Asked, Look, Part, cut_to, foot_lines, head_line, paragraph, styled
from monitor.render.numbers import count_text, place_of, size_text, with_bounds
from monitor.render.sayings import alarm_saying, as_long_as_fits
from monitor.render.seen import FeedAccount, Seen, StreamSeen
from monitor.render.stream_rows import age_text, state_word
from monitor.render.tables import RefitRow, history_table
from monitor.render.times import plural
from monitor.render.watch_lines import AlarmPast, past_lines, rule_lines, written_lines
from monitor.render.words.common import moments_words, p_words, size_with_unit
from monitor.render.words.findings import (
    Finding,
    baseline_alpha,
    findings,
    level_line,
    planned_or_before,
    quiet_words,
    rejected_words,
)
from monitor.render.words.watch import gathered_words, unwatched_words
from storage.facts import NoteWritten, RejectedSample

Side = Literal["tail", "watch"]
KEYS: dict[Side, str] = {
    "tail": "Left, Right: other streams   w: watch   a: acknowledge   Esc: back   h: help",
    "watch": "Left, Right: other streams   w: tail   a: acknowledge   Esc: back   h: help",
}
LEAST_CHART = 8
"""Lines below which the drawing is left out."""
CHART = 24
"""Lines above which it gives room to the refits."""
COMFORTABLE_CHART = 14
"""Lines that the drawing keeps where rules and past alarms stand on the same page."""
LEAST_REFITS = 2
TALL = 36
"""From this height on the side of the watch tells alarms at length, though they stand in its list as well."""


class Focused(msgspec.Struct, frozen=True, kw_only=True):
    """All that the page of one stream shows."""

    stream: StreamSeen
    feed: FeedAccount | None
    drawing: TailDrawing | None
    samples: tuple[RejectedSample, ...]
    past: tuple[AlarmPast, ...] = ()
    notes: tuple[NoteWritten, ...] = ()


def focus_page(
    focused: Focused,
    seen: Seen,
    now: int,
    look: Look,
    *,
    notice: str | None = None,
    live: bool = False,
    side: Side = "tail",
    asked: Asked | None = None,
) -> list[Text]:
    """The page as lines: exactly look.height of them when live, else at most so many.

    Sentences come first and take somewhat less than half of the height; then on the side "tail" the drawing and the
    last refits, on the side "watch" the rules, past alarms and notes; in a tall terminal the first side has both.
    """
    zone = seen.plan.timezone
    foot = foot_lines(look, KEYS[side], asked) if live else []
    head = [head_line(look, f"{focused.stream.name}  ({seen.store})", now, zone)]
    head += paragraph(look, notice, style=ABNORMAL) if notice else []
    inner = msgspec.structs.replace(look, height=look.height - len(head) - len(foot))
    body = _tail_page(focused, now, inner, zone) if side == "tail" else _watch_page(focused, now, inner, zone)
    lines = [*head, *body]
    return cut_to(look, lines, foot) if live else lines[: look.height]


def _tail_page(focused: Focused, now: int, look: Look, zone: str) -> list[Text]:
    """Sentences, drawing and refits in look.height lines; the watch in full where there is room, else in a sentence."""
    room, rules = look.height, _watch_block(focused, look, zone, now)
    figures = _figure_lines(focused.stream, now, look, zone)
    words = [*_headlines(focused, now, look, zone, room), *figures, *rules]
    if room - len(words) - LEAST_REFITS < COMFORTABLE_CHART:
        most = max(4, room * 9 // 20)
        words = [*_headlines(focused, now, look, zone, most // 2), *_watch_sentence(focused.stream, look), *figures]
        words = words if len(words) <= most else _shortened(words, most, look)
    return [*words, *_tail_side(focused, msgspec.structs.replace(look, height=room - len(words)), zone)]


def _watch_page(focused: Focused, now: int, look: Look, zone: str) -> list[Text]:
    """Headlines, rules, past alarms and notes in look.height lines."""
    words = _headlines(focused, now, look, zone, look.height if look.height >= TALL else 0)
    most = max(4, look.height * 9 // 20)
    words = words if len(words) <= most else _shortened(words, most, look)
    room, rules = look.height - len(words), _watch_block(focused, look, zone, now)
    return [*words, *(rules if len(rules) <= room else _shortened(rules, room, look))]


def _watch_block(focused: Focused, look: Look, zone: str, now: int) -> list[Text]:
    return [
        *rule_lines(focused.stream, look, zone, now),
        *past_lines(focused.past, look, zone, now),
        *written_lines(focused.notes, look, zone, now),
    ]


def _tail_side(focused: Focused, look: Look, zone: str) -> list[Text]:
    """The drawing, the last refits and rejected lines, in look.height lines."""
    room = look.height
    refits = _refit_lines(focused, look, zone)
    # Drawing first in importance: it gets what a handful of refits leaves, and not more than it can use.
    for_refits = min(len(refits), max(LEAST_REFITS + 1, room - CHART))
    chart = _drawing(focused, msgspec.structs.replace(look, height=room - for_refits))
    refits = [*refits[:1], *refits[max(1, len(refits) - max(0, room - len(chart) - 1)) :]][: max(0, room - len(chart))]
    rest = room - len(chart) - len(refits)
    return [*chart, *refits, *_rejected(focused, look)[: max(0, rest)]]


def _shortened(lines: list[Text], room: int, look: Look) -> list[Text]:
    """As many lines as fit, and how many are missing."""
    if room <= 0:
        return []
    hidden = len(lines) - room + 1
    return [*lines[: room - 1], styled(look, Part(f"  ({plural(hidden, 'more line')} in a taller terminal)"))]


def _headlines(focused: Focused, now: int, look: Look, zone: str, room: int) -> list[Text]:
    """What asks for a look, alarms as long as `room` lines take them; for a quiet stream that it is quiet."""
    stream = focused.stream
    one = sorted_stream(stream, zone, now)
    lines = as_long_as_fits(look, [alarm_saying(alarm, zone, now) for alarm in one.alarms], room)
    for finding in one.findings:
        style = "" if finding.refits else ABNORMAL
        lines += paragraph(look, _headline(finding), style=style, indent="  ", first="")
    if not lines:
        words = quiet_words(stream, zone, now) or _steady_words(stream)
        lines += paragraph(look, f"{_capital(words)}.", style=STRONG)
    return lines


def _watch_sentence(stream: StreamSeen, look: Look) -> list[Text]:
    words = unwatched_words(stream) if stream.watch is None else gathered_words(stream.watch)
    return paragraph(look, words, indent="  ", first="")


def _figure_lines(stream: StreamSeen, now: int, look: Look, zone: str) -> list[Text]:
    """The figures, then what is behind the findings: the lower a terminal, the less of the last."""
    found = findings(stream, zone, now)
    behind = [text for finding in found if finding.kind != "fit" for text in finding.detail]
    behind += [text for finding in found if finding.kind == "fit" for text in finding.detail[1:]]
    lines: list[Text] = []
    for text in [*_figures(stream, now), *behind, *_moments(stream)]:
        lines += paragraph(look, text, indent="  ", first="")
    return lines


def _headline(finding: Finding) -> str:
    """'Tail heavier than planned since the refit of 14:00 WET (no alarm).'."""
    if not finding.refits:
        return f"{_capital(finding.headline)}."
    count = f"{plural(finding.refits, 'refit')}, " if finding.kind == "limit" else ""
    return f"{_capital(finding.headline)} ({count}no alarm)."


def _steady_words(stream: StreamSeen) -> str:
    word = state_word(Sorted(stream=stream))
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
