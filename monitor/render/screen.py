"""The overview: what needs a look first, as sentences; then one line a stream.

Laid out for any size. What does not fit is counted, never silently dropped.
"""

from __future__ import annotations

from collections.abc import Sequence

import msgspec
from rich.text import Text

from monitor.render.frame import ABNORMAL, STRONG, Look, Part, cut_to, head_line, paragraph, styled
from monitor.render.numbers import count_text
from monitor.render.seen import Seen
from monitor.render.stream_rows import Sorted, note_lines, stream_table
from monitor.render.times import plural
from monitor.render.words.findings import feed_findings, findings, rejected_words

KEYS = "Up, Down: move   Enter: look closer   h: help   q: quit"
LEAST_TABLE = 3
"""Lines that sentences leave to the table, where a third of the height is less: heading, a stream, how many more."""
LOW = 16
"""A terminal with fewer lines has one line for each feed."""


def in_order(seen: Seen, now: int) -> list[Sorted]:
    """Streams in the order of the screen: the most pressing first, then by name."""
    found = [Sorted(stream=s, findings=tuple(findings(s, seen.plan.timezone, now))) for s in seen.streams]
    return sorted(found, key=lambda one: (one.findings[0].rank if one.findings else 99, one.stream.name))


def overview(
    seen: Seen,
    now: int,
    look: Look,
    *,
    order: Sequence[Sorted] | None = None,
    selected: str | None = None,
    notice: str | None = None,
    live: bool = False,
) -> list[Text]:
    """The overview as lines, `look.height` of them when live, else as many as there is something to say.

    Parameters: order, what in_order gave for this state, when it is at hand; selected, the name of the marked
    stream; notice, a sentence about the screen itself, such as that the store cannot be read at the moment.
    """
    streams, zone = in_order(seen, now) if order is None else order, seen.plan.timezone
    top = [head_line(look, f"Tailgauge  {seen.store}", now, zone)]
    top += paragraph(look, notice, style=ABNORMAL) if notice else []
    top += paragraph(look, summary(seen, streams), style=STRONG)
    foot = [*feed_lines(seen, look), *([styled(look, Part(KEYS))] if live else [])]
    room = look.height - len(top) - len(foot)
    body = (
        []
        if not streams
        else _body(streams, now, msgspec.structs.replace(look, height=room), zone=zone, selected=selected, live=live)
    )
    lines = [*top, *body]
    return cut_to(look, lines, foot) if live else [*lines, *foot][: look.height]


def summary(seen: Seen, streams: Sequence[Sorted]) -> str:
    """The whole screen in one sentence."""
    pressing = sum(bool(one.findings) for one in streams)
    feeds = len(feed_findings(seen))
    also = f" Of {plural(feeds, 'feed')} many lines cannot be used." if feeds else ""
    if not streams:
        return f"No stream yet: no usable line has come.{also}"
    total = plural(len(streams), "stream")
    if not pressing:
        return f"{total}: nothing needs a look.{also}" if not also else f"{total}.{also}"
    verb = "needs" if pressing == 1 else "need"
    return f"{pressing} of {total} {verb} a look.{also}"


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
    streams: Sequence[Sorted], now: int, look: Look, *, zone: str, selected: str | None, live: bool
) -> list[Text]:
    """Sentences, then the table, in look.height lines: as much of the sentences as leaves room for rows."""
    pressing = [one for one in streams if one.findings]
    blank = [Text("", end="")]
    least = min(len(streams) + 1, max(LEAST_TABLE, look.height // 3))
    all_rows = len(streams) + 1
    for depth, rows in ((2, all_rows), (1, all_rows), (1, least), (0, least)):
        if len(pressing) + rows > look.height:
            continue  # Each takes a line at least: no need to make hundreds of sentences to learn that.
        said = [line for one in pressing for line in _said(one, look, depth)]
        if len(said) + bool(said) * 2 + rows <= look.height:
            break
    else:
        said = _first_said(pressing, look, max(0, look.height - least - 2))
    parts = [*blank, *said] if said else []
    room = look.height - len(parts) - 1
    table = stream_table(
        streams, now, msgspec.structs.replace(look, height=room), zone=zone, selected=selected, live=live
    )
    parts += [*blank, *table]
    notes = note_lines(streams[: look.height], look)
    if len(parts) + len(notes) + 1 <= look.height:
        parts += [*blank, *notes]
    return parts


def _said(one: Sorted, look: Look, depth: int) -> list[Text]:
    """Depth 0: one line a stream; 1: its headlines; 2: the figures behind them as well."""
    name = one.stream.name
    if depth == 0:
        more = f" (and {len(one.findings) - 1} more)" if len(one.findings) > 1 else ""
        return [styled(look, Part(f"{name}{more}: {one.findings[0].sentence}", ABNORMAL))]
    lines = []
    for finding in one.findings:
        lines += paragraph(look, f"{name}: {finding.sentence}.", style=ABNORMAL, indent="  ", first="")
        if depth == 2:
            lines += [line for text in finding.detail for line in paragraph(look, text, indent="    ")]
    return lines


def _first_said(pressing: Sequence[Sorted], look: Look, room: int) -> list[Text]:
    """One line each for as many as there is room, the rest counted."""
    if len(pressing) <= room:
        return [line for one in pressing for line in _said(one, look, 0)]
    shown = max(0, room - 1)
    lines = [line for one in pressing[:shown] for line in _said(one, look, 0)]
    rest = len(pressing) - shown
    verb = "needs" if rest == 1 else "need"
    return [*lines, styled(look, Part(f"{plural(rest, 'more stream' if shown else 'stream')} {verb} a look", ABNORMAL))]
