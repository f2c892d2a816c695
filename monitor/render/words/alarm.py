"""The sentences of alarms: what changed, since when, what it means in units, what to do. Two sentences at most.

Each is made once, when something is told, and stored: so times name their day unless it is the day of the alarm itself.
"""

from __future__ import annotations

from collections.abc import Callable

import msgspec

from monitor.alarms.alarm import Alarm, NoticeKind
from monitor.alarms.priorities import Rule
from monitor.plan.spans import SECOND
from monitor.render.numbers import at_place, percent, place_of
from monitor.render.safe import plain
from monitor.render.times import local, short_moment, span_words
from monitor.render.words.common import one_in_words, size_with_unit


class PlanFacts(msgspec.Struct, frozen=True, kw_only=True):
    """What the sentence must know of the plan.

    one_in    the level is the size passed once in so many events
    limit     the size that must not be passed too often, in `unit`; None without one
    planned   the baseline is a plan from the settings
    """

    timezone: str
    unit: str
    one_in: int
    limit: float | None = None
    planned: bool = False


def alarm_message(alarm: Alarm, facts: PlanFacts) -> str:
    """What is told when the alarm is raised, for example

    'north-dock: tail heavier since about 14:05 WET (13:20 to 14:40); one event in 10 000 passes 9 400 units now
    (planned 5 200), above the limit of 6 000 units. Look for what changed then, and decide whether the plan still
    holds.'
    """
    parts = [f"{_head(alarm, facts)}{_since(alarm, facts.timezone)}", _figures(alarm, facts)]
    first = f"{plain(alarm.stream)}: {'; '.join(part for part in parts if part)}."
    return first + _response(alarm)


def _response(alarm: Alarm) -> str:
    response = plain(alarm.response).strip().rstrip(".")
    return f" {response[:1].upper()}{response[1:]}." if response else ""


def without_response(alarm: Alarm) -> str:
    """The message without what to do, and without its full stop: what is told where there is little room."""
    return plain(alarm.message).removesuffix(_response(alarm)).removesuffix(".")


def notice_text(kind: NoticeKind, alarm: Alarm, at: int, facts: PlanFacts) -> str:
    """What a notice says. `alarm` is the alarm after what the notice tells, its message made already."""
    name = f"{plain(alarm.stream)}: {_head(alarm, facts)}"
    when = short_moment(at, facts.timezone, alarm.raised_at)
    match kind:
        case "raised":
            return alarm.message
        case "raised again":
            return f"Again, at {when}: {alarm.message}"
        case "reminder":
            return f"Nobody has acknowledged this since {_raised(alarm, facts)}: {alarm.message}"
        case "returned":
            return f"{name}: back to normal since {when}, but nobody has acknowledged the alarm."
        case "acknowledged":
            return f"{name}: acknowledged{_by(alarm.seen_by)}{_concluded(alarm, at)} at {when}; the condition stands."
        case "suppressed":
            return f"{name}: {state_words(alarm, facts.timezone, alarm.raised_at)}, at {when}."
        case "closed":
            return f"{name}: closed at {when}{_concluded(alarm, at)}."


def state_words(alarm: Alarm, zone: str, now: int) -> str:
    """The state in a few words, with what holds it: 'shelved until 15:00 WET', 'unacknowledged (held, planned: ..)'."""
    if alarm.pending_until is not None:
        return f"on-delay until {short_moment(alarm.pending_until, zone, now)}"
    if alarm.shelved_until is not None:
        return f"shelved until {short_moment(alarm.shelved_until, zone, now)}"
    if alarm.held is not None:
        return f"{alarm.state} (held, planned: {plain(alarm.held)})"
    if alarm.wait_until is not None:
        return f"{alarm.state} (waiting until {short_moment(alarm.wait_until, zone, now)})"
    return alarm.state


def _raised(alarm: Alarm, facts: PlanFacts) -> str:
    return short_moment(alarm.raised_at, facts.timezone, alarm.raised_at)


def _by(who: str | None) -> str:
    return f" by {plain(who)}" if who else ""


def _concluded(alarm: Alarm, at: int) -> str:
    """The decision that was taken at this moment."""
    taken = [one for one in alarm.decisions if one.at == at]
    if not taken:
        return ""
    last = taken[-1]
    note = f" ({plain(' '.join(last.note.split()))})" if last.note.strip() else ""
    return f", decided as {last.choice}{_by(last.by) if alarm.state == 'normal' else ''}{note}"


def _since(alarm: Alarm, zone: str) -> str:
    """' since about 14:05 WET (13:20 to 14:40)'; without a known change the moment it was seen."""
    if alarm.rule == "single event":
        when = short_moment(alarm.found_at, zone, alarm.raised_at)
        return f" at {when}{f', {plain(alarm.cause)}' if alarm.cause else ''}"
    if alarm.changed_at is None:
        return f", seen at {short_moment(alarm.found_at, zone, alarm.raised_at)}"
    text = f" since about {short_moment(alarm.changed_at, zone, alarm.raised_at)}"
    if alarm.changed_between is None:
        return text
    first, last = (local(moment, zone) for moment in alarm.changed_between)
    middle = local(alarm.changed_at, zone)
    if first.date() == middle.date() == last.date() and first.tzname() == middle.tzname() == last.tzname():
        return f"{text} ({first:%H:%M} to {last:%H:%M})"
    sides = (short_moment(moment, zone, alarm.raised_at) for moment in alarm.changed_between)
    return f"{text} ({' to '.join(sides)})"


def _head(alarm: Alarm, facts: PlanFacts) -> str:
    return _HEADS[alarm.rule](alarm, facts)


def _exponent(alarm: Alarm, _: PlanFacts) -> str:
    return f"tail {alarm.direction or 'different'}"


def _tail_share(alarm: Alarm, _: PlanFacts) -> str:
    return {"heavier": "more large events", "lighter": "fewer large events"}.get(
        alarm.direction or "", "another share of large events"
    )


def _level(_: Alarm, facts: PlanFacts) -> str:
    what = "the agreed size" if facts.limit is None else f"the limit of {size_with_unit(facts.limit, facts.unit)}"
    return f"{what} has been passed more often than agreed"


def _rival(alarm: Alarm, _: PlanFacts) -> str:
    return f"the tail looks like a {plain(alarm.cause or 'rival')} rather than a plain power law"


def _single_event(alarm: Alarm, facts: PlanFacts) -> str:
    size = f" of {size_with_unit(alarm.after, facts.unit)}" if alarm.after is not None else ""
    return f"one event{size}"


_HEADS: dict[Rule, Callable[[Alarm, PlanFacts], str]] = {
    "exponent": _exponent,
    "tail share": _tail_share,
    "level": _level,
    "rival": _rival,
    "single event": _single_event,
    "fit": lambda alarm, facts: "sizes no longer follow a power law",
    "body": lambda alarm, facts: "the ordinary sizes have changed",
    "no events": lambda alarm, facts: "no events",
    "rejects": lambda alarm, facts: "more lines than usual cannot be used",
}


def _figures(alarm: Alarm, facts: PlanFacts) -> str:
    """Before and after in units, and what it means for the limit; empty for a rule without figures."""
    before, after = alarm.before, alarm.after
    if after is None:
        return ""
    match alarm.measure:
        case "level":
            return _level_figures(before, after, facts)
        case "share":
            was = "" if before is None else f" (before {percent(before)})"
            return f"now {percent(after)} of {'lines' if alarm.rule == 'rejects' else 'events'}{was}"
        case "rate":
            was = "" if before is None else f" ({'agreed' if alarm.rule == 'level' else 'before'} {rate_words(before)})"
            return f"now {rate_words(after)}{was}"
        case "silence":
            usual = "" if before is None else f", usually one every {span_words(max(SECOND, round(before * SECOND)))}"
            return f"none for {span_words(round(after * SECOND))}{usual}"
        case "size":
            return _size_figures(before, alarm, facts)
        case _:
            return ""


def rate_words(a_day: float) -> str:
    """How often, from how often a day: '3.2 times a day', 'once in 30 days', 'never'."""
    if a_day <= 0:
        return "never"
    if a_day >= 1:
        return "once a day" if a_day == 1 else f"{_two_digits(a_day)} times a day"
    return f"once in {_two_digits(1 / a_day)} days" if a_day > 1e-6 else "less than once in 1 000 000 days"


def _two_digits(value: float) -> str:
    """An estimate of little precision: whatever is known from the few events since a change holds no more."""
    text = at_place(value, place_of(value, None) + 1)
    return text.removesuffix(".0")


def _level_figures(before: float | None, after: float, facts: PlanFacts) -> str:
    text = f"{one_in_words(facts.one_in)} passes {_two_digits(after)} {plain(facts.unit)} now"
    if before is not None:
        text += f" ({'planned' if facts.planned else 'before'} {_two_digits(before)})"
    if facts.limit is None:
        return text
    side = "above" if after > facts.limit else "below" if after < facts.limit else "at"
    still = "still " if before is not None and (before > facts.limit) == (after > facts.limit) else ""
    return f"{text}, {still}{side} the limit of {size_with_unit(facts.limit, facts.unit)}"


def _size_figures(before: float | None, alarm: Alarm, facts: PlanFacts) -> str:
    if facts.limit is not None and alarm.after is not None and alarm.after > facts.limit:
        return f"the limit is {size_with_unit(facts.limit, facts.unit)}"
    return "" if before is None else f"the largest before was {size_with_unit(before, facts.unit)}"
