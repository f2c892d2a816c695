"""No sequence of stimuli breaks an alarm: hypothesis looks for one (derandomised: it cannot fail by chance)."""

from __future__ import annotations

from hypothesis import settings
from hypothesis import strategies as st
from hypothesis.stateful import RuleBasedStateMachine, initialize, invariant, rule

from monitor.alarms.alarm import Alarm, Outcome
from monitor.alarms.known import KnownChange
from monitor.alarms.machine import raise_alarm, step
from monitor.alarms.priorities import DAY, HOUR, MINUTE
from monitor.alarms.states import CHOICES, MOVES
from monitor.alarms.stimuli import (
    Acknowledge,
    Cleared,
    Decide,
    Measured,
    Note,
    Remove,
    Restore,
    Shelve,
    Speaks,
    Stimulus,
    Ticked,
    Unshelve,
)
from tests.alarms.examples import T0, policy, spoke

PERSONS = st.sampled_from(["ana", "bo", ""])
SPANS = st.integers(0, 3 * DAY // MINUTE).map(lambda minutes: minutes * MINUTE)
LEGAL = {(move.state, move.to, move.cause) for move in MOVES}
PEOPLE_ONLY = {"acknowledged"}


class AnySequence(RuleBasedStateMachine):
    def __init__(self) -> None:
        super().__init__()
        self.t = T0
        self.known = (
            KnownChange(start=T0 + HOUR, end=T0 + 5 * HOUR, streams="*", reason="fair", effect="hold notices"),
        )
        self.told: set[str] = set()

    @initialize(on_delay=st.sampled_from([0, HOUR]), off_delay=st.sampled_from([MINUTE, HOUR]), momentary=st.booleans())
    def raised(self, on_delay: int, off_delay: int, momentary: bool) -> None:
        treated = policy(on_delay=on_delay, off_delay=off_delay, momentary=momentary)
        self.keep(None, raise_alarm(spoke(at=self.t), treated, self.known))

    def keep(self, before: Alarm | None, outcome: Outcome) -> None:
        state = before.state if before else "normal"
        for change in outcome.changes:
            assert change.from_state == state
            assert change.cause == "note" or (change.from_state, change.to_state, change.cause) in LEGAL
            if change.to_state in PEOPLE_ONLY and change.from_state != change.to_state:
                assert change.by
            state = change.to_state
        assert outcome.alarm.state == state
        assert outcome.refused is None or not outcome.consequences
        for notice in outcome.notices:
            assert notice.at <= self.t
            assert notice.kind != "raised" or not self.told
            self.told.add(notice.kind)
        self.alarm: Alarm = outcome.alarm

    def do(self, stimulus: Stimulus) -> None:
        again = step(self.alarm, stimulus, self.t, self.known)
        assert step(self.alarm, stimulus, self.t, self.known) == again
        self.keep(self.alarm, again)

    @rule(span=SPANS)
    def time_passes(self, span: int) -> None:
        self.t += span
        self.do(Ticked())
        assert step(self.alarm, Ticked(), self.t, self.known).alarm == self.alarm

    @rule(span=SPANS)
    def time_passes_unseen(self, span: int) -> None:
        self.t += span

    @rule(direction=st.sampled_from(["heavier", "lighter", None]))
    def speaks(self, direction: str | None) -> None:
        self.do(Speaks(spoke=spoke(at=self.t, direction=direction)))

    @rule(share=st.floats(0.0, 2.0))
    def measured(self, share: float) -> None:
        self.do(Measured(share=share))

    @rule()
    def cleared(self) -> None:
        self.do(Cleared())

    @rule(by=PERSONS, act=st.sampled_from([Acknowledge, Unshelve, Restore]))
    def acts(self, by: str, act: type[Acknowledge | Unshelve | Restore]) -> None:
        self.do(act(by=by))

    @rule(by=PERSONS, note=st.sampled_from(["", "broken"]))
    def removed(self, by: str, note: str) -> None:
        self.do(Remove(by=by, note=note))

    @rule(by=PERSONS, span=st.integers(-1, 60))
    def shelved(self, by: str, span: int) -> None:
        self.do(Shelve(by=by, until=self.t + span * DAY))

    @rule(by=PERSONS, choice=st.sampled_from(CHOICES), days=st.none() | st.integers(-1, 9))
    def decides(self, by: str, choice: str, days: int | None) -> None:
        until = None if days is None else self.t + days * DAY
        self.do(Decide(by=by, choice=choice, note="why", until=until))  # type: ignore[arg-type]

    @rule(text=st.text(max_size=3))
    def notes(self, text: str) -> None:
        self.do(Note(by="ana", text=text))

    @invariant()
    def a_shelf_always_has_an_end(self) -> None:
        alarm = getattr(self, "alarm", None)
        if alarm is not None:
            assert (alarm.state == "shelved") == (alarm.shelved_until is not None)
            if alarm.shelved_until is not None:
                assert step(alarm, Ticked(), alarm.shelved_until, self.known).alarm.state != "shelved"

    @invariant()
    def the_fields_agree_with_the_state(self) -> None:
        alarm = getattr(self, "alarm", None)
        if alarm is None:
            return
        if alarm.state == "acknowledged":
            assert alarm.seen_by
            assert alarm.standing
        if alarm.state == "returned to normal unacknowledged":
            assert alarm.seen_by is None
            assert not alarm.standing
        if alarm.state == "unacknowledged":
            assert alarm.seen_by is None
            assert alarm.standing
            assert (alarm.held is None) == (alarm.held_until is None)
            assert alarm.held is not None or alarm.raised > 0
        if alarm.state == "normal":
            assert alarm.standing == (alarm.pending_until is not None)
        assert alarm.held is None or alarm.state == "unacknowledged"
        assert alarm.wait_until is None or alarm.state == "acknowledged"


AnySequence.TestCase.settings = settings(max_examples=120, stateful_step_count=25, deadline=None, derandomize=True)
TestAnySequence = AnySequence.TestCase
