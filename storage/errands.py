"""The fact of an errand: one notice on its way to one receiver, from the commit of the notice to its end."""

from __future__ import annotations

from typing import Literal

from storage.facts import Fact

ErrandState = Literal["waiting", "delivered", "given up", "overtaken"]


class ErrandStood(Fact, frozen=True, kw_only=True):
    """An errand as it stands; the newest row of a notice and receiver counts. All but `at` is wall clock, ns.

    at         the moment the notice speaks of
    due        when to try next
    first_try  when it was tried first; ended_at, when it was delivered, given up or overtaken
    detail     what the last try said
    """

    notice: str
    alarm: str
    receiver: str
    at: int
    due: int
    state: ErrandState = "waiting"
    tries: int = 0
    first_try: int | None = None
    ended_at: int | None = None
    detail: str | None = None
    known_at: int
