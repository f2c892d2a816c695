"""One handler a stimulus; nothing else in the project decides."""

from __future__ import annotations

import msgspec

from monitor.alarms.alarm import Alarm
from monitor.engine import alarming, intake, posts, refits, retention, sealing
from monitor.engine.state import State
from monitor.engine.stimuli import Arrived, Asked, ChainSeen, CommitDue, Ended, Judged, Stimulus
from storage.facts import Fact, PaneSealed, RequestAnswered


def step(state: State, stimulus: Stimulus) -> list[Fact]:
    """Let one thing happen: changes the state, returns the facts to commit before anything else is done.

    Facts of panes, chains and streams are held back until CommitDue, so that a commit holds many blocks.
    """
    match stimulus:
        case Arrived():
            intake.arrived(state, stimulus)
        case ChainSeen():
            intake.chain_seen(state, stimulus)
        case Ended():
            intake.count_waiting(state)
            sealing.end_chains(state)
        case CommitDue():
            return _commit_due(state, stimulus.now)
        case Judged():
            return refits.judged(state, stimulus)
        case Asked():
            return _asked(state, stimulus)
    return []


def _commit_due(state: State, now: int) -> list[Fact]:
    sealing.rest_idle_chains(state, now)
    facts = sealing.advance(state, now)
    facts += sealing.drain(state, now)
    sealed = [fact for fact in facts if isinstance(fact, PaneSealed)]
    facts += retention.forget_old(state, sealed, now)
    for stream in {fact.stream: None for fact in sealed}:
        baseline = refits.planned_baseline(state, stream, now)
        if baseline is not None:
            state.baselines[stream] = baseline
            facts.append(baseline)
            facts += posts.post_planned(
                state, baseline, refits.watch_order(state, stream, baseline.panes_to + state.plan.pane), now
            )
    facts += _silence(state, {fact.stream for fact in sealed}, now)
    return facts + alarming.pass_time(state, now)


def _asked(state: State, stimulus: Asked) -> list[Fact]:
    try:
        act = msgspec.json.decode(stimulus.act, type=alarming.Act)
    except msgspec.DecodeError as error:
        answer = f"not understood: {error}"
        return [RequestAnswered(id=stimulus.request, done=False, answer=answer, known_at=stimulus.now)]
    alarm = None if stimulus.alarm is None else msgspec.json.decode(stimulus.alarm, type=Alarm)
    return alarming.asked(state, stimulus.request, act, alarm, stimulus.now)


def _silence(state: State, sealed: set[str], now: int) -> list[Fact]:
    """Streams whose windows are all judged: their watch goes on over panes that stayed empty."""
    busy = sealed | {job.stream for job in state.jobs}
    idle = [stream for stream in state.watches if stream not in busy]
    marks = {stream: state.marks.get(state.carriers(stream), 0) for stream in idle}
    ended = {stream: mark for stream, mark in marks.items() if mark < sealing.END_OF_TIME}
    orders = {stream: refits.watch_order(state, stream, mark) for stream, mark in ended.items()}
    return posts.silent_streams(state, orders, ended, now)


def committed(state: State, facts: list[Fact]) -> None:
    """The facts are on disk: the windows they sealed may now be judged."""
    sealed = [fact for fact in facts if isinstance(fact, PaneSealed)]
    state.jobs.extend(sealing.job_of(fact) for fact in sorted(sealed, key=lambda fact: (fact.end, fact.stream)))
