"""What the store holds: one frozen record a table. Times are ns since 1970 UTC; JSON texts are canonical.

`about` is the moment a fact speaks of (event time), `known_at` the moment it was written (wall clock).
Equality of stores leaves known_at, durations, identities of files and versions out.
"""

from __future__ import annotations

from typing import Literal

import msgspec

from storage.pane import Pane


class Fact(msgspec.Struct, frozen=True, kw_only=True):
    """Base of the records that go into one commit."""


class SettingsTaken(Fact, frozen=True, kw_only=True):
    """The settings that decide from `effective_from` on."""

    digest: str
    text: str
    effective_from: int
    known_at: int


class StreamState(Fact, frozen=True, kw_only=True):
    """A stream as it stands: first and newest effective time of its events, and their number."""

    stream: str
    feed: str
    unit: str
    first: int
    newest: int
    events: int
    late: int


class PanePart(Fact, frozen=True, kw_only=True):
    """An additive part of an open pane: what came since the last commit."""

    stream: str
    start: int
    end: int
    content: Pane


class StoredPane(msgspec.Struct, frozen=True, kw_only=True):
    """A sealed pane as it is read back."""

    start: int
    end: int
    digest: str
    content: Pane


class PaneSealed(Fact, frozen=True, kw_only=True):
    """Orders the store to sum a pane's parts into its final row and to queue the refit of its window."""

    stream: str
    start: int
    end: int
    window_start: int
    settings: str
    known_at: int


class ChainState(Fact, frozen=True, kw_only=True):
    """Where one chain of lines stands: position, clockwork of effective time, and its accounts.

    lines == events + waiting + skipped + rejected, at every commit.
    """

    feed: str
    chain: str
    bookmark: str
    running_max: int | None
    edge: int | None
    """Floor given to a chain found late or back from idle, so that sealed panes stay sealed."""
    idle: bool
    waiting: str | None
    """JSON of one event whose stamp is far ahead and waits for the next line to confirm it."""
    lines: int
    events: int
    late: int
    skipped: dict[str, int]
    rejected: dict[str, int]


class RejectedSample(Fact, frozen=True, kw_only=True):
    """One line that could not be used, kept for people to look at."""

    feed: str
    chain: str
    reason: str
    position: int
    text: bytes
    known_at: int


class Advance(Fact, frozen=True, kw_only=True):
    """The watermark of a set of feeds moved because their chains were idle, not because lines came."""

    feeds: str
    to: int
    known_at: int


class Forget(Fact, frozen=True, kw_only=True):
    """Orders the store to delete what has grown too old; None keeps that kind for good.

    Refits whose window ends at or before refits_before go, but for those that a baseline comes from; then
    panes that end at or before panes_before, but for those that a kept refit reads.
    """

    stream: str
    panes_before: int | None
    refits_before: int | None
    known_at: int


class Forgotten(Fact, frozen=True, kw_only=True):
    """What was deleted: the range, how much, and a digest over the digests of the panes."""

    stream: str
    start: int
    end: int
    panes: int
    events: int
    refits: int
    digest: str
    known_at: int


RefitState = Literal["done", "failed", "skipped"]


class RefitJob(msgspec.Struct, frozen=True, kw_only=True):
    """A window waiting to be judged. Queued in the transaction that seals its last pane."""

    stream: str
    start: int
    end: int
    settings: str
    attempts: int = 0


class RefitStored(Fact, frozen=True, kw_only=True):
    """One scheduled judgement of a window. `judgement`, `comparison` and `flags` are JSON."""

    id: str
    stream: str
    start: int
    end: int
    state: RefitState
    panes: int
    window_digest: str
    settings: str
    seed: int
    judgement: str
    comparison: str | None
    flags: str
    reason: str | None
    attempts: int
    seconds: float
    versions: str
    known_at: int


class RefitRetried(Fact, frozen=True, kw_only=True):
    """The worker was lost on this window; it will be tried again with the same seed."""

    stream: str
    end: int
    attempts: int


BaselineSource = Literal["plan", "first window", "accepted"]


class BaselineSet(Fact, frozen=True, kw_only=True):
    """What later windows are compared with, from `effective_from` on.

    panes_to is the end of the panes it was judged on (panes before it are never compared with it);
    n_tail and n are None for a plan, whose exponent counts as known.
    """

    id: str
    stream: str
    source: BaselineSource
    refit: str | None
    alpha: float
    xmin: float
    n_tail: int | None
    n: int | None
    p: float | None
    plausible: bool | None
    counting: str
    panes_to: int
    effective_from: int
    known_at: int
    by: str | None = None
    note: str | None = None


class WatchBegun(Fact, frozen=True, kw_only=True):
    """A watch comes into force: what it compares with, its rules and their budget, and the ground of its promise."""

    id: str
    stream: str
    baseline: str
    effective_from: int
    watch: str
    ground: str | None
    known_at: int


class WatchStood(Fact, frozen=True, kw_only=True):
    """Where a stream's watch stands after a slot, and what each rule read in it (JSON)."""

    stream: str
    watch: str
    at: int
    state: str
    readings: str


class RuleSpoke(Fact, frozen=True, kw_only=True):
    """A rule spoke: its evidence, and when the change began (JSON, None where it cannot be told)."""

    id: str
    stream: str
    rule: str
    at: int
    watch: str
    spoken: str
    change: str | None
    known_at: int


class AlarmStood(Fact, frozen=True, kw_only=True):
    """An alarm as it stands (JSON), with what it is looked up by."""

    id: str
    stream: str
    rule: str
    state: str
    raised_at: int
    open: bool
    alarm: str
    known_at: int


class AlarmMoved(Fact, frozen=True, kw_only=True):
    """One row of an alarm's history; `by` is None when the program acted by itself."""

    id: str
    alarm: str
    at: int
    from_state: str
    to_state: str
    cause: str
    by: str | None
    note: str | None
    known_at: int


class NoticeQueued(Fact, frozen=True, kw_only=True):
    """Something that is to be told about an alarm; `data` is the JSON that is sent, the same at every try."""

    id: str
    alarm: str
    stream: str
    kind: str
    at: int
    data: str
    known_at: int


class NoteWritten(Fact, frozen=True, kw_only=True):
    """A person's note about a moment."""

    id: str
    at: int
    by: str
    text: str
    known_at: int


class KnownAdded(Fact, frozen=True, kw_only=True):
    """A known change that a person declared, or that a decision declares."""

    id: str
    start: int
    end: int
    streams: str
    reason: str
    effect: str
    by: str
    known_at: int


class ChangeAccepted(Fact, frozen=True, kw_only=True):
    """A person accepts a change as the new normal: what came before `since` no longer counts for the baseline."""

    id: str
    stream: str
    since: int
    by: str
    note: str
    known_at: int


class Request(msgspec.Struct, frozen=True, kw_only=True):
    """What a person asked for through the store, and the daemon's answer. `act` is JSON."""

    id: str
    act: str
    made_at: int
    done: bool | None
    answer: str | None


class RequestAnswered(Fact, frozen=True, kw_only=True):
    """The answer to a request: done, or why not."""

    id: str
    done: bool
    answer: str
    known_at: int
