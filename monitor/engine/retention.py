"""What has grown too old, by event time: once a day and stream, when a pane seals."""

from __future__ import annotations

from collections.abc import Iterable

from monitor.engine.state import State
from monitor.plan.spans import DAY
from storage.facts import Fact, Forget, PaneSealed


def forget_old(state: State, sealed: Iterable[PaneSealed], now: int) -> list[Fact]:
    """The deletions that newly sealed panes make due."""
    panes, refits = state.plan.keep_panes, state.plan.keep_refits
    if panes is None and refits is None:
        return []
    facts: list[Fact] = []
    for stream, end in {fact.stream: fact.end for fact in sealed}.items():
        day = end // DAY * DAY
        if day > state.forgotten.get(stream, -1):
            state.forgotten[stream] = day
            facts.append(
                Forget(
                    stream=stream,
                    panes_before=None if panes is None else day - panes,
                    refits_before=None if refits is None else day - refits,
                    known_at=now,
                )
            )
    return facts
