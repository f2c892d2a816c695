"""The watch in words: what its rules look at, how far each is from speaking, and what is promised."""

from __future__ import annotations

from monitor.alarms.priorities import Rule
from monitor.plan.spans import DAY
from monitor.render.numbers import count_text
from monitor.render.safe import plain
from monitor.render.seen import Seen, StreamSeen, WatchSeen
from monitor.render.times import plural
from monitor.watch.rules import Reading

LOOKS_AT: dict[Rule, str] = {
    "exponent": "how fast large sizes get rare",
    "tail share": "how many events are in the tail",
    "fit": "whether a power law still fits",
    "level": "how often the limit is passed",
    "rival": "whether another tail fits better",
    "body": "the ordinary sizes",
    "no events": "silence",
    "rejects": "lines that cannot be used",
    "single event": "one event that is too large",
}
"""What each rule looks at, in a few words."""

WAY_CELLS = 10
_SAYS_WHICH_WAY = 0.1
"""Below this part of the way the direction is chance, and is not told."""
_STEPS = ((1.0, "speaks"), (0.9, "about to speak"), (0.6, "near speaking"), (0.35, "half way"), (0.1, "on its way"))


def way_bar(way: float) -> str:
    """The way to speaking as ten ASCII cells; only a rule that speaks fills all of them."""
    full = WAY_CELLS if way >= 1 else min(WAY_CELLS - 1, round(way * WAY_CELLS))
    return "#" * full + "." * (WAY_CELLS - full)


def way_words(reading: Reading) -> str:
    """How far the rule is from speaking: 'half way', with the direction where its evidence has one."""
    if reading.rule in ("body", "single event"):
        return "no way to show, speaks at once"
    if reading.ln_statistic is None:
        return "nothing gathered yet"
    words = next((words for least, words in _STEPS if reading.way >= least), "far from speaking")
    which = reading.direction if reading.way >= _SAYS_WHICH_WAY and reading.rule != "level" else None
    return f"{words}, towards {which}" if which else words


def way_text(reading: Reading) -> str:
    """'49 %', empty for a rule that gathers nothing."""
    return "" if reading.ln_statistic is None else way_percent(reading.way)


def way_percent(way: float) -> str:
    """Whole per cents: '49 %'; 'under 1 %'; only a rule that speaks is at '100 %'."""
    if way >= 1:
        return "100 %"
    return f"{min(99, round(100 * way))} %" if way >= 0.01 else "under 1 %"


def days_words(days: float) -> str:
    """'360 days'."""
    return plural(round(days), "day") if days >= 10 else f"{days:.2g} days"


def promise_words(watch: WatchSeen) -> str:
    """'At most one false alarm in 360 days on average, all rules of this stream together; measured on ...'."""
    ground = watch.ground
    asked = f"one false alarm in {days_words(watch.promised_days)} on average, all rules of this stream together"
    if ground is None:
        why = "rests on independence: a plan brings no past to measure it on"
        return f"Promise: at most {asked}; {why}."
    if not ground.kept:
        return f"Not promised: at most {asked} was asked for, but {plain(ground.words)}."
    return f"Promise: at most {asked}; {plain(ground.words)}."


def all_promised_words(seen: Seen) -> str:
    """The promise to who hears of every stream, and to who hears of one; empty while nothing is watched."""
    days = [stream.watch.promised_days for stream in seen.streams if stream.watch is not None]
    if not days:
        return ""
    asked = days_words(seen.plan.everywhere.false_alarm_every / DAY)
    one = days_words(min(days)) if min(days) == max(days) else f"{days_words(min(days))} or more"
    watched = f"{count_text(len(days))} of {plural(len(seen.streams), 'stream')} watched"
    return f"watch: {watched}; false alarms at most one in {asked} on average, of one stream one in {one}"


def unwatched_words(stream: StreamSeen) -> str:
    """Why nothing is watched on a stream; empty when it is."""
    if stream.watch is not None:
        return ""
    if stream.accepted:
        return "Not watched for now: a change was accepted, and the baseline from it on is still to come."
    if stream.baseline is not None:
        return "Not watched: there is a baseline, but no watch was begun on it."
    judged = stream.judgement
    found = f"; the last has {count_text(judged.n_tail)}" if judged is not None and judged.n_tail is not None else ""
    return (
        f"Not watched yet: a baseline needs a window with {count_text(stream.plan.baseline_tail)} tail events{found}."
    )


def gathered_words(watch: WatchSeen) -> str:
    """The watch in one sentence: 'Watch: rival 49 % of the way to speaking, the others 6 % or less; ...'."""
    nearest = watch.nearest
    if nearest is None:
        text = "Watch: nothing gathered yet"
    else:
        others = [one.way for one in watch.readings if one.ln_statistic is not None and one is not nearest]
        text = f"Watch: {nearest.rule} {way_percent(nearest.way)} of the way to speaking"
        which = nearest.direction if nearest.way >= _SAYS_WHICH_WAY and nearest.rule != "level" else None
        text += f" (towards {which})" if which else ""
        if others:
            most = way_percent(max(others))
            text += f", the others {most if most.startswith('under') else f'{most} or less'}"
    missing = ", ".join(one.rule for one in watch.watch.unwatched)
    return f"{text}; not watched: {missing}." if missing else f"{text}."
