"""The watch of one stream as lines: what each rule has gathered, the promise, past alarms and notes near them."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import msgspec
from rich.text import Text

from monitor.alarms.alarm import Alarm
from monitor.plan.spans import DAY
from monitor.render.attention import is_new
from monitor.render.frame import ABNORMAL, STRONG, Look, Part, paragraph, styled
from monitor.render.safe import padded, plain
from monitor.render.seen import Refit, StreamSeen, WatchSeen
from monitor.render.times import plural, short_moment
from monitor.render.words.alarm import state_words
from monitor.render.words.watch import LOOKS_AT, WAY_CELLS, promise_words, unwatched_words, way_bar, way_text, way_words
from monitor.watch.rules import Reading
from storage.facts import AlarmMoved, NoteWritten

NEAR = 7 * DAY
"""Notes from so long before what is shown on are near it."""
NOTES = 5
_RULE_CELLS, _PERCENT_CELLS = 12, 9
_ROOM_FOR_WHAT = 110


class AlarmPast(msgspec.Struct, frozen=True, kw_only=True):
    """An alarm with its history, oldest first."""

    alarm: Alarm
    moves: tuple[AlarmMoved, ...]


def notes_near(
    notes: Sequence[NoteWritten], past: Sequence[AlarmPast], refits: Sequence[Refit]
) -> tuple[NoteWritten, ...]:
    """The last notes about moments that the page of a stream tells of: its alarms and its refits."""
    moments = [one.alarm.changed_at or one.alarm.raised_at for one in past] + [refit.start for refit in refits[:1]]
    first = min(moments, default=0) - NEAR
    return tuple(note for note in notes if note.at >= first)[-NOTES:]


def rule_lines(stream: StreamSeen, look: Look, zone: str, now: int) -> list[Text]:
    """What each rule has gathered and how far it is from speaking; rules that are not watched, and why; the promise."""
    watch = stream.watch
    if watch is None:
        return paragraph(look, unwatched_words(stream), indent="  ", first="")
    spoken = {alarm.rule for alarm in stream.alarms}
    lines = [_heading(watch, look, zone, now)]
    lines += [_rule_line(reading, look, alarm=reading.rule in spoken) for reading in watch.readings]
    for one in watch.watch.unwatched:
        lines += paragraph(look, f"{one.rule}: not watched: {one.why}", indent="    ", first="  ")
    return [*lines, *paragraph(look, promise_words(watch), indent="  ", first="")]


def _heading(watch: WatchSeen, look: Look, zone: str, now: int) -> Text:
    if not watch.readings:
        return styled(look, Part(f"Watched since {short_moment(watch.since, zone, now)}; nothing read yet", STRONG))
    when = short_moment(watch.at, zone, now)
    return styled(look, Part(f"How far each rule is on its way to an alarm, {when}", STRONG))


def _rule_line(reading: Reading, look: Look, *, alarm: bool) -> Text:
    """'  exponent      49 %  #####.....  half way, towards heavier'."""
    words = way_words(reading)
    if alarm:
        words = "alarm open" if reading.ln_statistic is None else f"alarm open, since then {words}"
    if look.width >= _ROOM_FOR_WHAT:
        words = f"{padded(LOOKS_AT[reading.rule], 34)}  {words}"
    bar = way_bar(reading.way) if reading.ln_statistic is not None else ""
    way = padded(way_text(reading), _PERCENT_CELLS, right=True)
    return styled(look, Part(f"  {padded(reading.rule, _RULE_CELLS)}  {way}  {padded(bar, WAY_CELLS)}  {words}"))


def past_lines(past: Iterable[AlarmPast], look: Look, zone: str, now: int) -> list[Text]:
    """Past and open alarms, newest first: what repeats is counted, only the last word is told."""
    lines: list[Text] = []
    for one in past:
        style = ABNORMAL if is_new(one.alarm) else ""
        lines += paragraph(look, _past_words(one, zone, now), style=style, indent="    ", first="  ")
    return [styled(look, Part("Alarms of this stream, newest first", STRONG)), *lines] if lines else []


def _past_words(one: AlarmPast, zone: str, now: int) -> str:
    """'8 Mar 18:00 UTC: tail share, heavier: unacknowledged; spoke 9 times; last: seen by ana, 9 Mar 07:00'."""
    alarm = one.alarm
    which = f", {alarm.direction}" if alarm.direction else ""
    text = f"{short_moment(alarm.raised_at, zone, now)}: {alarm.rule}{which}"
    text += f", {'closed' if not alarm.is_open else state_words(alarm, zone, now)}"
    text += f"; spoke {plural(alarm.spoken, 'time')}" if alarm.spoken > 1 else ""
    if one.moves:
        last = one.moves[-1]
        by = f" by {plain(last.by)}" if last.by else ""
        note = f' ("{plain(last.note)}")' if last.note else ""
        text += f"; last: {last.cause}{by}{note}, {short_moment(last.at, zone, now)}"
    return text


def written_lines(notes: Sequence[NoteWritten], look: Look, zone: str, now: int) -> list[Text]:
    """Notes of people, a paragraph each."""
    if not notes:
        return []
    lines = [styled(look, Part("Notes of people", STRONG))]
    for note in notes:
        text = f"{short_moment(note.at, zone, now)}  {plain(note.by)}: {plain(note.text)}"
        lines += paragraph(look, text, indent="    ", first="  ")
    return lines
