"""Alarms and findings as the screen tells them: in one line, as a sentence, or with what stands behind it."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Sequence

import msgspec
from rich.text import Text

from monitor.alarms.alarm import Alarm
from monitor.alarms.states import ACKNOWLEDGED, RETURNED, UNACKNOWLEDGED
from monitor.render.frame import ABNORMAL, STRONG, Look, Part, paragraph, styled
from monitor.render.safe import plain
from monitor.render.times import local, plural, short_moment
from monitor.render.words.alarm import state_words, without_response
from monitor.render.words.findings import Finding


class Saying(msgspec.Struct, frozen=True, kw_only=True):
    """One thing to tell at three lengths: `line` is cut to one line, `text` wraps, `full` is told with `behind`."""

    line: str
    text: str
    full: str
    behind: tuple[str, ...] = ()
    style: str = ""


def alarm_saying(alarm: Alarm, zone: str, now: int) -> Saying:
    """The alarm's message; its times name no day when it is the day it was raised, so that day is told before it."""
    short = without_response(alarm)
    raised = short_moment(alarm.raised_at, zone, now)
    other_day = local(alarm.raised_at, zone).date() != local(now, zone).date()
    day = f"{raised.rsplit(' ', 2)[0]}, " if other_day else ""
    state = state_words(alarm, zone, now)
    by = f" by {plain(alarm.seen_by)}" if alarm.state == ACKNOWLEDGED and alarm.seen_by else ""
    return Saying(
        line=f"{_mark(alarm)}{day}{short}",
        text=f"{day}{short} ({state}{by})",
        full=plain(alarm.message),
        behind=(f"{state}{by}; {alarm.priority} priority, rule {alarm.rule}, raised {raised}",),
        style=alarm_style(alarm),
    )


def alarm_style(alarm: Alarm) -> str:
    """Colour for what is abnormal and new; what went by itself is bold, what somebody has seen is plain."""
    if alarm.state == UNACKNOWLEDGED and alarm.held is None:
        return ABNORMAL
    return STRONG if alarm.state == RETURNED else ""


def _mark(alarm: Alarm) -> str:
    if alarm.held is not None:
        return "held: "
    return {ACKNOWLEDGED: "seen: ", RETURNED: "gone: "}.get(alarm.state, "")


def finding_saying(name: str, finding: Finding) -> Saying:
    """A finding of refits. One that is judged refit by refit is told plainly, with how many of them say it."""
    tells = f"{name}: {finding.sentence}"
    if finding.refits:
        count = "one refit" if finding.refits == 1 else f"{finding.refits} refits"
        tells = f"({count}) {tells}"
    return Saying(
        line=tells, text=f"{tells}.", full=f"{tells}.", behind=finding.detail, style="" if finding.refits else ABNORMAL
    )


def said(look: Look, sayings: Iterable[Saying], depth: int) -> list[Text]:
    """Depth 0: a line each; 1: as sentences; 2: with what stands behind them."""
    lines: list[Text] = []
    for one in sayings:
        if depth == 0:
            lines.append(styled(look, Part(one.line, one.style)))
            continue
        lines += paragraph(look, one.full if depth == 2 else one.text, style=one.style, indent="  ", first="")
        if depth == 2:
            lines += [line for text in one.behind for line in paragraph(look, text, indent="    ")]
    return lines


def as_long_as_fits(look: Look, sayings: Sequence[Saying], room: int) -> list[Text]:
    """All of them in at most `room` lines, but a line each at least: the first are the first to be told at length.

    What stands behind them is told once every one has its whole sentence.
    """
    depths = [0] * len(sayings)
    blocks = [said(look, [one], 0) for one in sayings]
    used = len(blocks)
    for depth in (1, 2):
        for at, one in enumerate(sayings):
            longer = said(look, [one], depth)
            if used + len(longer) - len(blocks[at]) > room:
                break
            used += len(longer) - len(blocks[at])
            blocks[at], depths[at] = longer, depth
        if any(told < depth for told in depths):
            break
    return [line for block in blocks for line in block]


Telling = Callable[[], Saying]
"""Makes a saying when there is room for it."""


def first_said(look: Look, tellings: Sequence[Telling], room: int, names: tuple[str, str]) -> list[Text]:
    """A line each for as many as there is room, the rest counted. names: what one and what many are called."""
    if room <= 0 or not tellings:
        return []
    shown = len(tellings) if len(tellings) <= room else room - 1
    lines = said(look, (make() for make in tellings[:shown]), 0)
    rest = len(tellings) - shown
    if not rest:
        return lines
    more = plural(rest, *names)
    more = f"and {more} more" if shown else more
    return [*lines, styled(look, Part(more, tellings[shown]().style))]
