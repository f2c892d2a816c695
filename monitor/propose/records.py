"""What a proposal consists of: frozen records, ready for words and for JSON."""

from __future__ import annotations

import msgspec

from monitor.parse.lines import Field, LineFormat


class SizeCandidate(msgspec.Struct, frozen=True, kw_only=True):
    """A field that could be the size. A higher score is more likely; evidence says why, in words."""

    field: Field | None
    score: float
    evidence: tuple[str, ...]


class NotTheSize(msgspec.Struct, frozen=True, kw_only=True):
    """A field with numbers that was not taken for a size, and why."""

    field: Field | None
    why: str


class TimeFound(msgspec.Struct, frozen=True, kw_only=True):
    """A field that holds times.

    kind      what its values look like, in words
    zoned     every value says its offset or is an epoch number
    unit      of epoch numbers, "auto" otherwise
    readable  share of the lines with a usable time
    disorder  ns by which 999 in 1000 lines are at most behind the latest before them
    """

    field: Field
    kind: str
    zoned: bool
    unit: str
    readable: float
    disorder: int
    score: float


class StreamField(msgspec.Struct, frozen=True, kw_only=True):
    """A field whose values could name the streams."""

    field: Field
    values: int
    score: float
    evidence: str


class Watchable(msgspec.Struct, frozen=True, kw_only=True):
    """What watching could make of one stream.

    share             of the sampled events
    events_per_day    estimated; None without times
    days_to_baseline  until the first baseline, if one event in ten is in the tail; None without times
    """

    stream: str
    share: float
    events_per_day: float | None
    days_to_baseline: float | None
    words: str


class RejectedLine(msgspec.Struct, frozen=True, kw_only=True):
    """A sampled line that the proposed settings would reject."""

    reason: str
    place: str
    text: str


class Proposal(msgspec.Struct, frozen=True, kw_only=True):
    """Everything proposed, why, and what remains in doubt. `settings` is the commented file."""

    feed: str
    follow: tuple[str, ...]
    format: LineFormat
    unit: str
    sampled_lines: int
    sampled_bytes: int
    format_evidence: str
    sizes: tuple[SizeCandidate, ...]
    not_sizes: tuple[NotTheSize, ...]
    times: tuple[TimeFound, ...]
    stream_fields: tuple[StreamField, ...]
    streams: tuple[Watchable, ...]
    rejected: dict[str, int]
    skipped: dict[str, int]
    samples: tuple[RejectedLine, ...]
    doubts: tuple[str, ...]
    pane: str
    window: str
    lateness: str
    settings: str
    next_commands: tuple[str, ...]
