"""What the story's end tells: each scripted change, the alarm that named it, what was promised, and false alarms."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import zip_longest

import msgspec

from demo.warehouse import DAY, OPENING, Change
from monitor.alarms.alarm import Alarm
from monitor.render.numbers import at_place, count_text, place_of
from monitor.render.seen import WatchSeen
from monitor.render.times import moment_text, plural, short_moment, span_words
from monitor.render.words.watch import days_words
from monitor.watch.dependence import Ground
from monitor.watch.rules import Watch
from monitor.watch.runlength import Setting, alpha_delay
from storage.history import Reader

ZONE = "UTC"


@dataclass(frozen=True, slots=True)
class Told:
    """What the store told: alarms that were announced, in order; watches by stream, in order; the last event (ns)."""

    alarms: tuple[Alarm, ...]
    watches: dict[str, tuple[WatchSeen, ...]]
    end: int


def summary(reader: Reader, changes: Sequence[Change], written: int | None) -> list[str]:
    """The story's end in sentences. `written` is the number of lines in the log, None when it was cut short."""
    told = _told(reader)
    lines = ["What was scripted, and what the watch said:"]
    for change in changes:
        lines += _change_lines(reader, change, told)
    lines.append(_false_alarms(told, changes))
    lines.append(_accounts(reader, written))
    return lines


def announced(reader: Reader) -> tuple[Alarm, ...]:
    """All alarms that were told to people, by the moment they were raised."""
    found = [msgspec.json.decode(stood.alarm, type=Alarm) for stood in reader.alarms()]
    return tuple(alarm for alarm in found if alarm.pending_until is None)


def _told(reader: Reader) -> Told:
    watches: dict[str, tuple[WatchSeen, ...]] = {}
    for begun in reader.watches():
        seen = WatchSeen(
            watch=msgspec.json.decode(begun.watch, type=Watch),
            ground=msgspec.json.decode(begun.ground or "null", type=Ground | None),
            since=begun.effective_from, at=begun.effective_from, readings=(),
        )  # fmt: skip
        watches[begun.stream] = (*watches.get(begun.stream, ()), seen)
    end = max((stream.newest for stream in reader.streams()), default=OPENING)
    return Told(announced(reader), watches, end)


def _change_lines(reader: Reader, change: Change, told: Told) -> list[str]:
    lines = [f"  {change.dock}, {moment_text(change.at, ZONE)}: {change.words}."]
    if told.end <= change.at:
        return [*lines, "    The story ended before this."]
    after = [alarm for alarm in told.alarms if alarm.stream == change.dock and alarm.raised_at > change.at]
    named = next((alarm for alarm in after if alarm.rule in change.named_by), None)
    if after and after[0] is not named:
        lines.append(f"    First alarm {_by_which(reader, change, after[0], told)}.")
    if named is None:
        lines.append("    No alarm named it by the end of the story.")
    else:
        lines.append(f"    Named {_by_which(reader, change, named, told)}; {_change_set(change, named)}.")
    return [*lines, f"    {_promised(reader, change, told)}"]


def _by_which(reader: Reader, change: Change, alarm: Alarm, told: Told) -> str:
    """'by the rule exponent (heavier), 6 hours and 580 tail events later'."""
    events = ""
    watch = _watch_at(told, change.dock, alarm.raised_at)
    if watch is not None:
        window = reader.window(change.dock, change.at, alarm.raised_at, 10**7).content
        events = f" and {plural(int(window.counts[window.sizes >= _xmin(watch)].sum()), 'tail event')}"
    which = f" ({alarm.direction})" if alarm.direction else ""
    return f"by the rule {alarm.rule}{which}, {span_words(alarm.raised_at - change.at)}{events} later"


def _watch_at(told: Told, dock: str, moment: int) -> WatchSeen | None:
    return next((one for one in reversed(told.watches.get(dock, ())) if one.since < moment), None)


def _xmin(watch: WatchSeen) -> float:
    return watch.watch.baseline.yardstick.xmin


def _change_set(change: Change, alarm: Alarm) -> str:
    """Whether the set of moments that the alarm gave holds the true one."""
    if alarm.changed_between is None:
        return "this rule does not say since when"
    first, last = alarm.changed_between
    ends = f"{short_moment(first, ZONE, change.at)} to {short_moment(last, ZONE, change.at)}"
    holds = "holds" if first <= change.at <= last else "does not hold"
    return f"it put the change at {ends}, which {holds} the true moment"


def _promised(reader: Reader, change: Change, told: Told) -> str:
    """What was promised for such a change before it came."""
    watch = _watch_at(told, change.dock, change.at + 1)
    if watch is None:
        return "Nothing was promised: the dock was not watched yet."
    wolf = f"at most one false alarm in {days_words(watch.promised_days)}"
    setting = _setting(reader, change, watch)
    if change.shift is None or setting is None:
        return f"Promised: {wolf}; no delay is promised for a change of this kind."
    delay = alpha_delay(setting, change.shift, with_optimum=False)
    if delay.exceedances_q90 is None or delay.days_q90 is None:
        return f"Promised: {wolf}; a shift of alpha by {change.shift:+.2f} is not promised to be seen."
    within = f"{_rough(delay.exceedances_q90)} tail events ({_rough(24 * delay.days_q90)} hours)"
    return (
        f"Promised: {wolf}; a shift of alpha by {change.shift:+.2f} seen, 9 times in 10, within {within}"
        f"{_pane_words(reader, change)}."
    )


def _pane_words(reader: Reader, change: Change) -> str:
    """The watch reads whole panes: what is seen inside one is told at its end."""
    panes = reader.panes(change.dock, change.at)
    return f", told at the end of a pane of {span_words(panes[0].end - panes[0].start)}" if panes else ""


def _setting(reader: Reader, change: Change, watch: WatchSeen) -> Setting | None:
    """The dock as it was before the change, as the promise needs it."""
    base = watch.watch.baseline
    before = reader.window(change.dock, OPENING, change.at, 10**7).content
    events = int(before.counts.sum())
    tail = int(before.counts[before.sizes >= _xmin(watch)].sum())
    if base.alpha is None or not 0 < tail < events:
        return None
    return Setting(
        alpha=base.alpha, share=tail / events, events_a_day=events / ((change.at - OPENING) / DAY),
        budget_days=watch.watch.budget_days, prior=None if base.log_sizes.known else base.exceedances,
        weights={one.rule: one.weight for one in watch.watch.rules},
    )  # fmt: skip


def _false_alarms(told: Told, changes: Sequence[Change]) -> str:
    """Alarms that nothing in the script accounts for, against the number promised for the time watched so."""
    until = {change.dock: change.at for change in changes}
    causeless = [alarm for alarm in told.alarms if alarm.raised_at <= until.get(alarm.stream, alarm.raised_at)]
    days = allowed = 0.0
    for dock, watches in told.watches.items():
        end = min(until.get(dock, told.end), told.end)
        for watch, after in zip_longest(watches, watches[1:]):
            span = max(0, min(end, after.since if after is not None else end) - watch.since) / DAY
            days += span
            allowed += span / watch.promised_days
    found = plural(len(causeless), "alarm")
    kinds = f" ({', '.join(f'{alarm.stream}: {alarm.rule}' for alarm in causeless)})" if causeless else ""
    return (
        f"Where nothing had changed, {at_place(days, -1)} dock-days were watched: {found}{kinds}; "
        f"promised were at most {_rough(allowed)} on average."
    )


def _rough(value: float) -> str:
    """Two digits."""
    return at_place(value, place_of(value, None) + 1)


def _accounts(reader: Reader, written: int | None) -> str:
    chains = reader.chains()
    read = sum(chain.lines for chain in chains)
    events = sum(chain.events for chain in chains)
    rejected = sum(sum(chain.rejected.values()) for chain in chains)
    head = f"{count_text(written)} lines written, " if written is not None else ""
    return f"{head}{count_text(read)} read: {count_text(events)} events, {count_text(rejected)} spoilt lines rejected."
