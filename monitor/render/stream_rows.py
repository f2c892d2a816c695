"""One line a stream: state in a word, figures with intervals against baseline and limit, the last refits."""

from __future__ import annotations

from collections.abc import Sequence

from rich.text import Text

from monitor.alarms.priorities import Rule
from monitor.render.attention import Sorted, is_new
from monitor.render.charts import STRIP_LETTERS, refit_letter, refit_strip
from monitor.render.frame import ABNORMAL, STRONG, Look, Part, paragraph, styled
from monitor.render.numbers import bounds_text, count_text, estimate, place_of, size_text
from monitor.render.safe import padded
from monitor.render.seen import StreamSeen
from monitor.render.tables import GAP, Column, chosen
from monitor.render.times import plural, span_short
from monitor.render.words.findings import baseline_alpha, quiet_words
from monitor.render.words.watch import way_text
from monitor.tail.judgement import GoodnessOfFit, Level

STRIP = 24
"""Refits shown at most in a line; as many are read for a frame."""
NARROW_STRIP, WIDE = 6, 110


_STATE_OF: dict[Rule, str] = {"fit": "misfit", "level": "limit", "single event": "one event", "tail share": "share"}
"""One word for the state that a rule's alarm puts its stream in, where it is not the rule's own name."""


def state_word(one: Sorted) -> str:
    """The state of a stream in a word or two: of its first alarm, else of what refits alone say."""
    if one.alarms:
        first = one.alarms[0]
        which = first.direction if first.rule == "exponent" else None
        word = which or _STATE_OF.get(first.rule, first.rule)
        return word if is_new(first) else f"{word}, {'held' if first.held is not None else 'seen'}"
    if one.faults:
        return one.faults[0].kind
    if one.flags:
        count = max(flag.refits for flag in one.flags)
        return "one refit" if count == 1 else f"{count} refits"
    judged = one.stream.judgement
    if one.stream.latest is None:
        return "new"
    return "no tail" if judged is None or judged.alpha is None else "steady"


def stream_table(
    streams: Sequence[Sorted], now: int, look: Look, *, zone: str, selected: str | None, live: bool
) -> list[Text]:
    """Heading and one line a stream in at most look.height lines, the selected one among them."""
    names = [one.stream.name for one in streams]
    marked = names.index(selected) if selected in names else None
    first, last = _shown(len(streams), look.height - 1, marked)
    inner = look.width - 2 * live
    # Only what is shown is made into text: a thousand streams must not cost more than a screenful.
    kept, widths = chosen(_columns(streams[first:last], now, look), inner)
    lines = [styled(look, Part("  " * live + _cells(kept, widths, None)))]
    for row, at in enumerate(range(first, last)):
        one = streams[at]
        lead = ("> " if at == marked else "  ") * live
        words = quiet_words(one.stream, zone, now)
        name, state = (_cells(kept[i : i + 1], widths[i : i + 1], row) for i in (0, 1))
        figures = words or _cells(kept[2:], widths[2:], row)
        strong = STRONG if at == marked else ""
        lines.append(
            styled(
                look,
                Part(lead + name + GAP, strong),
                Part(state, ABNORMAL if one.needs_a_look else strong),
                Part(GAP + figures, strong),
            )
        )
    hidden = len(streams) - (last - first)
    if hidden:
        where = f"{first} above, {len(streams) - last} below" if live else "the terminal is too low"
        lines.append(styled(look, Part("  " * live + f"{plural(hidden, 'stream')} not shown ({where})")))
    return lines[: max(0, look.height)]


def _shown(count: int, room: int, marked: int | None) -> tuple[int, int]:
    """Which rows are shown, [first, last), when `room` lines are free and one of them may tell of the rest."""
    if count <= room:
        return 0, count
    rows = max(0, room - 1)
    first = 0 if marked is None else max(0, min(marked - rows // 2, count - rows))
    return first, min(count, first + rows)


def _cells(kept: Sequence[Column], widths: Sequence[int], at: int | None) -> str:
    texts = [column.title if at is None else column.cells[at] for column in kept]
    return GAP.join(padded(t, w, right=c.right) for t, c, w in zip(texts, kept, widths, strict=True))


def _columns(streams: Sequence[Sorted], now: int, look: Look) -> list[Column]:
    found = [one.stream for one in streams]
    alphas = [_alpha(stream) for stream in found]
    fits = [_fit(_gof(stream)) for stream in found]
    strip = STRIP if look.width >= WIDE else NARROW_STRIP
    strips = tuple(refit_strip(stream.refits, strip) for stream in found)
    nearest = tuple(_nearest(stream) for stream in found)
    last = max((len(text) for text in strips), default=0)
    one_unit = len({stream.plan.unit for stream in found}) == 1
    return [
        Column(title="stream", cells=tuple(look.safe(stream.name) for stream in found), shrinks_to=14),
        Column(title="state", cells=tuple(state_word(one) for one in streams)),
        Column(title="alpha", cells=tuple(pair[0] for pair in alphas), right=True),
        Column(title="95 %", cells=tuple(pair[1] for pair in alphas), need=6),
        Column(title="base", cells=tuple(_baseline(stream) for stream in found), right=True, need=2),
        Column(title="p", cells=tuple(pair[0] for pair in fits), right=True, need=1),
        Column(title="95 %", cells=tuple(pair[1] for pair in fits), need=7),
        Column(title="level", cells=tuple(_level(stream, with_unit=not one_unit, look=look) for stream in found),
               right=True, need=3),
        Column(title="95 %", cells=tuple(_level_bounds(stream.level) for stream in found), need=11),
        Column(title="limit", cells=tuple(_limit(stream) for stream in found), right=True, need=9),
        Column(title="events", cells=tuple(count_text(stream.state.events) for stream in found), right=True, need=8),
        Column(title="late", cells=tuple(count_text(stream.state.late) for stream in found), right=True, need=10),
        Column(title="newest", cells=tuple(age_text(stream, now) for stream in found), right=True, need=4),
        *([Column(title="nearest rule", cells=nearest, need=6)] if any(nearest) else []),
        Column(title=f"last {last}" if last > 1 else "last", cells=strips, need=5),
    ]  # fmt: skip


def _alpha(stream: StreamSeen) -> tuple[str, str]:
    judged = stream.judgement
    if judged is None or judged.alpha is None:
        return "", ""
    bounds = "" if judged.alpha_interval is None else bounds_text(judged.alpha, judged.alpha_interval, join="-")
    return estimate(judged.alpha, judged.alpha_interval), bounds


def _gof(stream: StreamSeen) -> GoodnessOfFit | None:
    return None if stream.judgement is None else stream.judgement.gof


def _fit(gof: GoodnessOfFit | None) -> tuple[str, str]:
    if gof is None:
        return "", ""
    return estimate(gof.p, gof.p_interval), bounds_text(gof.p, gof.p_interval, join="-")


def _baseline(stream: StreamSeen) -> str:
    if stream.baseline is None:
        return ""
    judged = stream.judgement
    if judged is None or judged.alpha is None:
        return size_text(stream.baseline.alpha)
    return baseline_alpha(stream, stream.baseline.alpha, place_of(judged.alpha, judged.alpha_interval))


def _level(stream: StreamSeen, *, with_unit: bool, look: Look) -> str:
    level = stream.level
    if level is None or level.size is None:
        return ""
    text = estimate(level.size, level.interval)
    return f"{text} {look.safe(stream.plan.unit)}".rstrip() if with_unit else text


def _level_bounds(level: Level | None) -> str:
    return "" if level is None or level.size is None else bounds_text(level.size, level.interval, join="-")


def _limit(stream: StreamSeen) -> str:
    return "" if stream.plan.limit is None else size_text(stream.plan.limit)


def _nearest(stream: StreamSeen) -> str:
    """The rule that is nearest to speaking, with its part of the way: 'rival 49 %'."""
    reading = None if stream.watch is None else stream.watch.nearest
    return "" if reading is None else f"{reading.rule} {way_text(reading)}"


def age_text(stream: StreamSeen, now: int) -> str:
    """Age of the newest event: '12 s'; an event stamped ahead of the clock says so."""
    age = now - stream.state.newest
    return span_short(age) if age >= 0 else f"{span_short(-age)} ahead"


def note_lines(streams: Sequence[Sorted], look: Look) -> list[Text]:
    """What the columns mean, with the letters that occur."""
    found = [one.stream for one in streams]
    plans = [stream.plan for stream in found]
    one_in = {stream.level.one_in for stream in found if stream.level is not None}
    notes = ["alpha: the smaller, the heavier the tail; base: alpha planned, or of the first window"]
    notes.append("p: a large one is good, a small one says that a power law fits badly")
    if len(one_in) == 1:
        units, limits = {plan.unit for plan in plans}, {plan.limit for plan in plans}
        unit = f", in {units.pop()}" if len(units) == 1 else ""
        limit = limits.pop() if len(limits) == 1 else None
        text = f"level: one event in {count_text(one_in.pop())} passes it{unit}"
        notes.append(text + (f"; limit {size_text(limit)}" if limit is not None else ""))
    if any(stream.watch is not None for stream in found):
        notes.append("nearest rule: how much of its way to an alarm the rule that is nearest has gone")
    if any(one.flags and not one.alarms for one in streams):
        notes.append("state 'refits': so many refits in a row differ, without an alarm; now and then luck does that")
    seen = {refit_letter(refit) for stream in found for refit in stream.refits}
    letters = [f"{letter} {word}" for letter, word in STRIP_LETTERS if letter in seen]
    if letters:
        notes.append(f"last: the last refits, newest at the right: {', '.join(letters)}")
    return [line for note in notes for line in paragraph(look, note, indent="  ", first="")]
