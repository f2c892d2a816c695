"""How urgent each rule is, what to do when it speaks, and its delays: defaults that settings may replace.

Three priorities. The standard's guidance wants about 5 % of alarms high, 15 % medium and 80 % low [from memory]; it
wants a priority to come from the consequence and from the time there is to respond, and a response for every alarm: an
alarm nobody can act on should be none.
"""

from __future__ import annotations

from typing import Literal

import msgspec

Priority = Literal["high", "medium", "low"]
PRIORITIES: tuple[Priority, ...] = ("high", "medium", "low")

Rule = Literal["exponent", "tail share", "fit", "level", "rival", "body", "no events", "rejects", "single event"]
RULES: tuple[Rule, ...] = (
    "exponent", "tail share", "fit", "level", "rival", "body", "no events", "rejects", "single event",
)  # fmt: skip

MINUTE = 60 * 1_000_000_000
HOUR = 60 * MINUTE
DAY = 24 * HOUR


class Policy(msgspec.Struct, frozen=True, kw_only=True):
    """How the alarms of one rule are treated. Spans in ns.

    on_delay      the condition must last so long before it is announced
    return_below  it counts as gone while the rule's statistic stays below this share of its threshold ...
    off_delay     ... for so long
    longest_shelf the longest that one act of shelving may last
    momentary     each time the rule speaks is an occurrence of its own, to be told and seen anew
    response      what the person who is told should do: one sentence without its full stop
    """

    priority: Priority
    response: str
    on_delay: int = 0
    off_delay: int = DAY
    return_below: float = 0.1
    longest_shelf: int = 30 * DAY
    momentary: bool = False


_CAUSE = "look for what changed then, and decide whether the plan still holds"

POLICIES: dict[Rule, Policy] = {
    "exponent": Policy(priority="medium", response=_CAUSE),
    "tail share": Policy(priority="medium", response=_CAUSE),
    "level": Policy(
        priority="high", response="check what rests on this limit, then decide whether the plan still holds"
    ),
    "fit": Policy(
        priority="low", response="do not extrapolate by the power law, and read the rivals' sizes in the next refit"
    ),
    "rival": Policy(
        priority="low", response="read the sizes by the rival in the next refit before you rely on the level"
    ),
    "body": Policy(priority="low", response="look for a change of mix or of recording among the ordinary events"),
    "no events": Policy(
        priority="high",
        response="check that the source still writes and that its files are still found",
        off_delay=10 * MINUTE,
    ),
    "rejects": Policy(
        priority="medium", response="look at the rejected lines and compare them with the settings", off_delay=HOUR
    ),
    "single event": Policy(
        priority="high",
        response="look at this event in its file before you act on it",
        off_delay=10 * MINUTE,
        momentary=True,
    ),
}
"""Common practice for the choice: high where a limit or the watch itself is at stake, low where figures get less sure.

A statistic starts again at nothing when its rule has spoken, so that off_delay has to be long against the time the rule
takes to speak; a day is a compromise, and silence ends at once when events are back.
"""


def policy_for(rule: Rule, changes: dict[str, object] | None = None) -> Policy:
    """The rule's policy, with the fields that the settings replace."""
    policy = POLICIES[rule]
    return msgspec.structs.replace(policy, **changes) if changes else policy
