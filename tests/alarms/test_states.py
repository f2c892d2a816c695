"""The transition table: whole, without contradictions, and followed move by move."""

from __future__ import annotations

from itertools import product

import pytest

from monitor.alarms.machine import raise_alarm, step
from monitor.alarms.priorities import DAY, MINUTE
from monitor.alarms.states import CHOICES, EVENTS, MOVES, REFUSALS, STATES, Move, State, find_move, refusal
from monitor.alarms.stimuli import (
    Acknowledge,
    Cleared,
    Decide,
    Remove,
    Restore,
    Shelve,
    Speaks,
    Stimulus,
    Ticked,
    Unshelve,
)
from tests.alarms.examples import SPOKE, T0, alarm_in, policy, spoke

NOW = T0 + 2 * MINUTE

# The process-driven part of the state diagram of ISA-18.2 / IEC 62682, clause on alarm states [from memory].
STANDARD: list[tuple[State, str, State]] = [
    ("unacknowledged", "acknowledge", "acknowledged"),
    ("unacknowledged", "clears", "returned to normal unacknowledged"),
    ("acknowledged", "clears", "normal"),
    ("returned to normal unacknowledged", "acknowledge", "normal"),
    ("returned to normal unacknowledged", "speaks", "unacknowledged"),
    ("normal", "remove", "out of service"),
    ("unacknowledged", "shelve", "shelved"),
    ("acknowledged", "shelve", "shelved"),
    ("returned to normal unacknowledged", "shelve", "shelved"),
]


def test_every_pair_of_state_and_event_is_a_move_or_a_refusal_and_never_both() -> None:
    moves = {(move.state, move.event) for move in MOVES}
    assert moves.isdisjoint(REFUSALS)
    assert moves | set(REFUSALS) == set(product(STATES, EVENTS))


def test_conditions_leave_no_gap_and_no_choice() -> None:
    places = [(move.state, move.event, move.condition) for move in MOVES]
    assert len(places) == len(set(places))
    for state, event in {(move.state, move.event) for move in MOVES}:
        conditions = {move.condition for move in MOVES if (move.state, move.event) == (state, event)}
        assert conditions in ({"any"}, {"stands", "gone, unseen", "gone, seen"})


@pytest.mark.parametrize(("state", "event", "to"), STANDARD)
def test_the_standard_s_own_moves_are_in_the_table(state: State, event: str, to: State) -> None:
    assert [move.to for move in MOVES if (move.state, move.event) == (state, event)] == [to]


def test_each_move_and_each_refusal_has_its_own_words() -> None:
    assert all(move.cause and not move.cause.endswith(".") for move in MOVES)
    assert all(words and not words.endswith(".") for words in REFUSALS.values())


def stimulus_for(event: str) -> tuple[Stimulus, int]:
    """The stimulus that makes an event happen, and when."""
    if event in CHOICES:
        return Decide(by="bo", choice=event, note="as agreed", until=T0 + DAY if event == "wait" else None), NOW  # type: ignore[arg-type]
    at_once: dict[str, Stimulus] = {
        "speaks": Speaks(spoke=spoke(at=NOW)),
        "turns": Speaks(spoke=spoke(at=NOW, direction="lighter")),
        "recurs": Speaks(spoke=spoke(at=NOW)),
        "clears": Cleared(),
        "acknowledge": Acknowledge(by="bo"),
        "shelve": Shelve(by="bo", until=T0 + 2 * DAY),
        "unshelve": Unshelve(by="bo"),
        "remove": Remove(by="bo", note="no longer fed"),
        "restore": Restore(by="bo"),
    }
    return (at_once[event], NOW) if event in at_once else (Ticked(), T0 + DAY)


@pytest.mark.parametrize("move", MOVES, ids=lambda move: f"{move.state}: {move.event} [{move.condition}]")
def test_every_row_of_the_table_is_followed(move: Move) -> None:
    if move.event in ("on-delay over", "clears") and move.state == "normal":
        alarm = raise_alarm(SPOKE, policy(on_delay=5 * MINUTE)).alarm
        assert alarm.state == "normal"
    elif move.event == "wait over":
        alarm = step(alarm_in("acknowledged"), Decide(by="bo", choice="wait", until=T0 + DAY), NOW).alarm
    else:
        stands = move.condition in ("any", "stands")
        alarm = alarm_in(
            move.state, stands=stands, seen=move.condition == "gone, seen", momentary=move.event == "recurs"
        )
    stimulus, t = stimulus_for(move.event)
    outcome = step(alarm, stimulus, t)
    assert outcome.refused is None
    assert outcome.alarm.state == move.to
    change = outcome.changes[0]
    assert (change.from_state, change.to_state, change.cause) == (move.state, move.to, move.cause)
    assert change.at == t or move.event == "on-delay over"


@pytest.mark.parametrize(("state", "event"), [pair for pair in REFUSALS if stimulus_for(pair[1])[0] != Ticked()])
def test_every_refusal_is_said_in_words_and_changes_nothing(state: State, event: str) -> None:
    if state == "normal" and event in ("turns", "recurs"):
        event = "speaks"  # all three are told alike
    alarm = alarm_in(state)
    outcome = step(alarm, stimulus_for(event)[0], NOW)
    assert outcome.refused == refusal(state, event)  # type: ignore[arg-type]
    assert outcome.alarm == alarm
    assert outcome.changes == outcome.notices == outcome.consequences == ()


def test_nothing_becomes_acknowledged_but_by_a_person() -> None:
    by_itself = {"on-delay over", "speaks", "turns", "recurs", "clears", "shelf over", "wait over"}
    silent = [m for m in MOVES if m.event in by_itself and m.to == "acknowledged" and m.state != "acknowledged"]
    assert silent == []
    assert find_move("shelved", "shelf over", stands=True, seen=True) == find_move(
        "shelved", "shelf over", stands=True, seen=False
    )
