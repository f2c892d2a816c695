"""The states of an alarm, what can happen to it, and every legal move, as data.

After the alarm-management standard IEC 62682 / ISA-18.2 (its state diagram from memory): normal; unacknowledged;
acknowledged; returned to normal but unacknowledged; and the two ways of suppression that a person orders, shelved
(always with an end) and out of service (with who and why). Latching and suppression by design are not used: an alarm
that a known change explains stays in the diagram and is marked as held (monitor.alarms.machine).

Each pair of state and event is either in MOVES or in REFUSALS; a test holds the two together.
"""

from __future__ import annotations

from typing import Literal

import msgspec

State = Literal[
    "normal",
    "unacknowledged",
    "acknowledged",
    "returned to normal unacknowledged",
    "shelved",
    "out of service",
]
NORMAL: State = "normal"
UNACKNOWLEDGED: State = "unacknowledged"
ACKNOWLEDGED: State = "acknowledged"
RETURNED: State = "returned to normal unacknowledged"
SHELVED: State = "shelved"
OUT_OF_SERVICE: State = "out of service"

STATES: tuple[State, ...] = (NORMAL, UNACKNOWLEDGED, ACKNOWLEDGED, RETURNED, SHELVED, OUT_OF_SERVICE)

Event = Literal[
    "on-delay over",
    "speaks",
    "turns",
    "recurs",
    "clears",
    "acknowledge",
    "shelve",
    "unshelve",
    "shelf over",
    "remove",
    "restore",
    "wait over",
    "accept",
    "wait",
    "one-off",
    "planned",
    "data-fault",
]
EVENTS: tuple[Event, ...] = (
    "on-delay over", "speaks", "turns", "recurs", "clears", "acknowledge", "shelve", "unshelve", "shelf over", "remove",
    "restore", "wait over", "accept", "wait", "one-off", "planned", "data-fault",
)  # fmt: skip

Choice = Literal["accept", "wait", "one-off", "planned", "data-fault"]
CHOICES: tuple[Choice, ...] = ("accept", "wait", "one-off", "planned", "data-fault")
"""What a person can conclude from an alarm. Each is an event as well."""

Condition = Literal["any", "stands", "gone, unseen", "gone, seen"]
"""What decides between moves of one event: does the condition stand, and was it ever acknowledged?"""


class Move(msgspec.Struct, frozen=True):
    """One legal move: in `state`, when `event` happens under `condition`, the alarm goes `to`, because of `cause`."""

    state: State
    event: Event
    condition: Condition
    to: State
    cause: str


def _ends(state: State, event: Event, cause: str) -> tuple[Move, ...]:
    """Where an alarm goes when its suppression ends: what stands is announced anew, what was never seen stays so."""
    return (
        Move(state, event, "stands", UNACKNOWLEDGED, f"{cause} while the condition stands"),
        Move(state, event, "gone, unseen", RETURNED, f"{cause} after the condition had gone, never acknowledged"),
        Move(state, event, "gone, seen", NORMAL, f"{cause} after the condition had gone"),
    )


MOVES: tuple[Move, ...] = (
    Move(NORMAL, "on-delay over", "any", UNACKNOWLEDGED, "the condition outlasted the on-delay"),
    Move(NORMAL, "clears", "any", NORMAL, "the condition had gone before the on-delay was over"),
    Move(NORMAL, "remove", "any", OUT_OF_SERVICE, "taken out of service"),
    Move(NORMAL, "accept", "any", NORMAL, "accepted afterwards as the new baseline"),
    Move(NORMAL, "one-off", "any", NORMAL, "judged afterwards to have happened once"),
    Move(NORMAL, "planned", "any", NORMAL, "judged afterwards to have been planned"),
    Move(NORMAL, "data-fault", "any", NORMAL, "judged afterwards to be a fault of the data"),
    Move(UNACKNOWLEDGED, "speaks", "any", UNACKNOWLEDGED, "the rule spoke again"),
    Move(UNACKNOWLEDGED, "turns", "any", UNACKNOWLEDGED, "the rule speaks of the other direction now"),
    Move(UNACKNOWLEDGED, "recurs", "any", UNACKNOWLEDGED, "it happened again"),
    Move(UNACKNOWLEDGED, "clears", "any", RETURNED, "the condition has gone"),
    Move(UNACKNOWLEDGED, "acknowledge", "any", ACKNOWLEDGED, "acknowledged"),
    Move(UNACKNOWLEDGED, "shelve", "any", SHELVED, "shelved"),
    Move(UNACKNOWLEDGED, "remove", "any", OUT_OF_SERVICE, "taken out of service"),
    Move(UNACKNOWLEDGED, "accept", "any", NORMAL, "accepted as the new baseline"),
    Move(UNACKNOWLEDGED, "wait", "any", ACKNOWLEDGED, "acknowledged, to wait for more events"),
    Move(UNACKNOWLEDGED, "one-off", "any", NORMAL, "judged to have happened once"),
    Move(UNACKNOWLEDGED, "planned", "any", ACKNOWLEDGED, "acknowledged as planned"),
    Move(UNACKNOWLEDGED, "data-fault", "any", ACKNOWLEDGED, "acknowledged as a fault of the data"),
    Move(ACKNOWLEDGED, "speaks", "any", ACKNOWLEDGED, "the rule spoke again"),
    Move(ACKNOWLEDGED, "turns", "any", UNACKNOWLEDGED, "the rule speaks of the other direction now"),
    Move(ACKNOWLEDGED, "recurs", "any", UNACKNOWLEDGED, "it happened again"),
    Move(ACKNOWLEDGED, "clears", "any", NORMAL, "the condition has gone"),
    Move(ACKNOWLEDGED, "shelve", "any", SHELVED, "shelved"),
    Move(ACKNOWLEDGED, "remove", "any", OUT_OF_SERVICE, "taken out of service"),
    Move(ACKNOWLEDGED, "wait over", "any", UNACKNOWLEDGED, "the time to wait is over and the condition stands"),
    Move(ACKNOWLEDGED, "accept", "any", NORMAL, "accepted as the new baseline"),
    Move(ACKNOWLEDGED, "wait", "any", ACKNOWLEDGED, "waiting for more events"),
    Move(ACKNOWLEDGED, "one-off", "any", NORMAL, "judged to have happened once"),
    Move(ACKNOWLEDGED, "planned", "any", ACKNOWLEDGED, "judged to be planned"),
    Move(ACKNOWLEDGED, "data-fault", "any", ACKNOWLEDGED, "judged to be a fault of the data"),
    Move(RETURNED, "speaks", "any", UNACKNOWLEDGED, "the condition is back"),
    Move(RETURNED, "turns", "any", UNACKNOWLEDGED, "the rule speaks of the other direction now"),
    Move(RETURNED, "recurs", "any", UNACKNOWLEDGED, "it happened again"),
    Move(RETURNED, "acknowledge", "any", NORMAL, "acknowledged after it had gone"),
    Move(RETURNED, "shelve", "any", SHELVED, "shelved"),
    Move(RETURNED, "remove", "any", OUT_OF_SERVICE, "taken out of service"),
    Move(RETURNED, "accept", "any", NORMAL, "accepted as the new baseline"),
    Move(RETURNED, "one-off", "any", NORMAL, "judged to have happened once"),
    Move(RETURNED, "planned", "any", NORMAL, "judged to have been planned"),
    Move(RETURNED, "data-fault", "any", NORMAL, "judged to be a fault of the data"),
    Move(SHELVED, "speaks", "any", SHELVED, "the rule spoke while shelved"),
    Move(SHELVED, "turns", "any", SHELVED, "the rule spoke of the other direction while shelved"),
    Move(SHELVED, "recurs", "any", SHELVED, "it happened again while shelved"),
    Move(SHELVED, "clears", "any", SHELVED, "the condition went while shelved"),
    Move(SHELVED, "shelve", "any", SHELVED, "shelved with another end"),
    *_ends(SHELVED, "unshelve", "unshelved"),
    *_ends(SHELVED, "shelf over", "the time on the shelf was over"),
    Move(SHELVED, "remove", "any", OUT_OF_SERVICE, "taken out of service"),
    Move(OUT_OF_SERVICE, "speaks", "any", OUT_OF_SERVICE, "the rule spoke while out of service"),
    Move(OUT_OF_SERVICE, "turns", "any", OUT_OF_SERVICE, "the rule spoke of the other direction while out of service"),
    Move(OUT_OF_SERVICE, "recurs", "any", OUT_OF_SERVICE, "it happened again while out of service"),
    Move(OUT_OF_SERVICE, "clears", "any", OUT_OF_SERVICE, "the condition went while out of service"),
    *_ends(OUT_OF_SERVICE, "restore", "back in service"),
)

ACTS: tuple[Event, ...] = ("acknowledge", "accept", "wait", "one-off", "planned", "data-fault")
"""What a person who deals with the alarm does; not while it is suppressed."""

GONE_ALREADY = "its condition had gone already"
_NOT_SHELVED = "it is not shelved"
_IN_SERVICE = "it is in service"
_NO_CLOCK = "no such time is running"
_UNSHELVE_FIRST = "it is shelved: unshelve it first"
_RESTORE_FIRST = "it is out of service: put it back in service first"
_CLOSED = "it is closed, and its condition has gone"

REFUSALS: dict[tuple[State, Event], str] = {
    (NORMAL, "speaks"): "it is closed: what the rule says opens a new alarm",
    (NORMAL, "turns"): "it is closed: what the rule says opens a new alarm",
    (NORMAL, "recurs"): "it is closed: what the rule says opens a new alarm",
    (NORMAL, "acknowledge"): f"there is nothing to acknowledge: {_CLOSED}",
    (NORMAL, "shelve"): f"there is nothing to shelve: {_CLOSED}",
    (NORMAL, "wait"): f"there is nothing to wait for: {_CLOSED}",
    (ACKNOWLEDGED, "acknowledge"): "it is acknowledged already",
    (RETURNED, "clears"): GONE_ALREADY,
    (RETURNED, "wait"): "there is nothing to wait for: the condition has gone; acknowledge it",
    **{(state, "unshelve"): _NOT_SHELVED for state in STATES if state != SHELVED},
    **{(state, "restore"): _IN_SERVICE for state in STATES if state != OUT_OF_SERVICE},
    **{(state, "shelf over"): _NO_CLOCK for state in STATES if state != SHELVED},
    **{(state, "on-delay over"): _NO_CLOCK for state in STATES if state != NORMAL},
    **{(state, "wait over"): _NO_CLOCK for state in STATES if state != ACKNOWLEDGED},
    **{(SHELVED, event): _UNSHELVE_FIRST for event in ACTS},
    **{(OUT_OF_SERVICE, event): _RESTORE_FIRST for event in ACTS},
    (OUT_OF_SERVICE, "shelve"): _RESTORE_FIRST,
    (OUT_OF_SERVICE, "remove"): "it is out of service already",
}
"""Why an event cannot happen in a state, in words that follow the name of the alarm."""

_BY_PLACE: dict[tuple[State, Event], dict[Condition, Move]] = {}
for _move in MOVES:
    _BY_PLACE.setdefault((_move.state, _move.event), {})[_move.condition] = _move


def find_move(state: State, event: Event, *, stands: bool, seen: bool) -> Move | None:
    """The move that an event makes, or None when it is refused (REFUSALS says why).

    Parameters: stands, the condition is there; seen, somebody acknowledged it since it came.
    """
    moves = _BY_PLACE.get((state, event))
    if moves is None:
        return None
    exact: Condition = "stands" if stands else ("gone, seen" if seen else "gone, unseen")
    return moves.get("any") or moves[exact]


def refusal(state: State, event: Event) -> str:
    """Why the event cannot happen in this state."""
    return REFUSALS[state, event]
