"""The overview: alarms first, as sentences; below them, quietly, what refits alone say; then one line a stream.

Laid out for any size. What does not fit is counted, never silently dropped.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import partial

import msgspec
from rich.text import Text

from monitor.alarms.states import ACKNOWLEDGED, OUT_OF_SERVICE, SHELVED
from monitor.render.attention import Sorted, in_order, is_new, is_suppressed, urgency
from monitor.render.frame import ABNORMAL, STRONG, Asked, Look, Part, cut_to, foot_lines, head_line, paragraph, styled
from monitor.render.numbers import count_text
from monitor.render.sayings import Telling, alarm_saying, as_long_as_fits, finding_saying, first_said
from monitor.render.seen import Seen
from monitor.render.stream_rows import note_lines, stream_table
from monitor.render.times import plural
from monitor.render.words.findings import feed_findings, rejected_words
from monitor.render.words.watch import all_promised_words

KEYS = "Up, Down: move   Enter: look closer   a: acknowledge   h: help   q: quit"
LEAST_TABLE = 3
"""Lines that sentences leave to the table, where a third of the height is less: heading, a stream, how many more."""
LOW = 16
"""A terminal with fewer lines has one line for each feed."""


def overview(
    seen: Seen,
    now: int,
    look: Look,
    *,
    order: Sequence[Sorted] | None = None,
    selected: str | None = None,
    notice: str | None = None,
    live: bool = False,
    asked: Asked | None = None,
) -> list[Text]:
    """The overview as lines, `look.height` of them when live, else as many as there is something to say.

    Parameters: order, what in_order gave for this state, when it is at hand; selected, the name of the marked
    stream; notice, a sentence about the screen itself, such as that the store cannot be read at the moment; asked,
    what stands above the keys.
    """
    streams, zone = in_order(seen, now) if order is None else order, seen.plan.timezone
    top = [head_line(look, f"Tailgauge  {seen.store}", now, zone)]
    top += paragraph(look, notice, style=ABNORMAL) if notice else []
    top += paragraph(look, summary(seen, streams), style=STRONG)
    foot = [*feed_lines(seen, look), *(foot_lines(look, KEYS, asked) if live else [])]
    room = look.height - len(top) - len(foot)
    inner = msgspec.structs.replace(look, height=room)
    body = _body(seen, streams, now, inner, selected=selected, live=live) if streams else []
    lines = [*top, *body]
    return cut_to(look, lines, foot) if live else [*lines, *foot][: look.height]


def summary(seen: Seen, streams: Sequence[Sorted]) -> str:
    """The whole screen in one sentence."""
    feeds = len(feed_findings(seen))
    also = f" Of {plural(feeds, 'feed')} many lines cannot be used." if feeds else ""
    if not streams:
        return f"No stream yet: no usable line has come.{also}"
    total = plural(len(streams), "stream")
    pressing = sum(one.needs_a_look for one in streams)
    if pressing:
        head = f"{pressing} of {total} {'needs' if pressing == 1 else 'need'} a look"
    else:
        head = total if also else f"{total}: nothing needs a look"
    tail = "; ".join(text for text in (_alarm_count(streams), _flag_count(streams)) if text)
    return f"{('; ' if ':' in head else ': ').join(text for text in (head, tail) if text)}.{also}"


def _alarm_count(streams: Sequence[Sorted]) -> str:
    """'3 alarms, 1 acknowledged, 1 shelved': those that are told, then those that are only counted."""
    told = [alarm for one in streams for alarm in one.alarms]
    parts = [plural(len(told), "alarm")] if told else []
    seen = sum(alarm.state == ACKNOWLEDGED for alarm in told)
    parts += [f"{seen} acknowledged"] if seen else []
    quiet = [alarm for one in streams for alarm in one.stream.alarms if is_suppressed(alarm)]
    for word, count in (
        ("shelved", sum(alarm.state == SHELVED for alarm in quiet)),
        ("out of service", sum(alarm.state == OUT_OF_SERVICE for alarm in quiet)),
        ("on delay", sum(alarm.pending_until is not None for alarm in quiet)),
    ):
        parts += [f"{count} {word}" if parts else f"{plural(count, 'alarm')} {word}"] if count else []
    return ", ".join(parts)


def _flag_count(streams: Sequence[Sorted]) -> str:
    count = sum(bool(one.flags) for one in streams)
    return f"{plural(count, 'stream')} flagged by refits alone" if count else ""


def feed_lines(seen: Seen, look: Look) -> list[Text]:
    """What became of the lines of each feed, the troubled ones first; feeds beyond a few are counted."""
    troubled = {feed.feed for feed, _ in feed_findings(seen)}
    shown, lines_each = (1, 1) if look.height < LOW else (3, 2)
    lines = []
    for feed in sorted(seen.feeds, key=lambda one: (one.feed not in troubled, one.feed))[:shown]:
        text = f"{feed.feed}: {plural(feed.events, 'event')}, {count_text(feed.late)} late; {rejected_words(feed)}"
        style = ABNORMAL if feed.feed in troubled else ""
        lines += paragraph(look, text, style=style, indent="  ", first="")[:lines_each]
    if len(seen.feeds) > shown:
        lines.append(styled(look, Part(f"and {plural(len(seen.feeds) - shown, 'more feed')}")))
    return lines


def _body(
    seen: Seen, streams: Sequence[Sorted], now: int, look: Look, *, selected: str | None, live: bool
) -> list[Text]:
    """Sentences, then the table, in look.height lines: as much of the sentences as leaves room for rows."""
    zone, promised = seen.plan.timezone, all_promised_words(seen)
    blank = [Text("", end="")]
    said_lines = _sentences(streams, now, look, zone)
    parts = [*blank, *said_lines] if said_lines else []
    room = look.height - len(parts) - 1
    table = stream_table(
        streams, now, msgspec.structs.replace(look, height=room), zone=zone, selected=selected, live=live
    )
    parts += [*blank, *table]
    notes = [*note_lines(streams[: look.height], look), *paragraph(look, promised, indent="  ", first="")]
    if len(parts) + len(notes) + 1 <= look.height:
        parts += [*blank, *notes]
    return parts


def _sentences(streams: Sequence[Sorted], now: int, look: Look, zone: str) -> list[Text]:
    """Alarms and faults first, flags of refits below them, each as long as leaves room for the table."""
    all_rows = len(streams) + 1
    least = min(all_rows, max(LEAST_TABLE, look.height // 3))
    loud, quiet = _tellings(streams, now, zone)
    for rows in (all_rows, least):
        room = look.height - rows - 2
        # Each takes a line at least: no need to make hundreds of sentences to learn that they do not fit.
        if 0 < len(loud) + len(quiet) <= room:
            return as_long_as_fits(look, [make() for make in (*loud, *quiet)], room)
    room = max(0, look.height - least - 2)
    for_loud = min(len(loud), room)
    return [
        *first_said(look, loud, for_loud, ("alarm or fault", "alarms or faults")),
        *first_said(look, quiet, room - for_loud, ("flag of refits alone", "flags of refits alone")),
    ]


def _tellings(streams: Sequence[Sorted], now: int, zone: str) -> tuple[list[Telling], list[Telling]]:
    """What is told loudly, in order of urgency over all streams, and what is told quietly."""
    alarms = sorted((alarm for one in streams for alarm in one.alarms), key=urgency)
    new = [partial(alarm_saying, alarm, zone, now) for alarm in alarms if is_new(alarm)]
    known = [partial(alarm_saying, alarm, zone, now) for alarm in alarms if not is_new(alarm)]
    faults = [partial(finding_saying, one.stream.name, fault) for one in streams for fault in one.faults]
    flags: list[Telling] = [partial(finding_saying, one.stream.name, flag) for one in streams for flag in one.flags]
    return [*new, *faults, *known], flags
