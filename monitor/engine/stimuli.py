"""What can happen to the engine. `now` is the caller's clock, ns since 1970 UTC."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

import msgspec
import numpy as np
from numpy.typing import NDArray

from monitor.engine.watching import Measured, Watched
from storage.facts import RefitJob


@dataclass(frozen=True, slots=True, kw_only=True)
class Lines:
    """The events of one block of lines, and the account of the lines that are none.

    sizes    float64 (k,), in line order; stamps int64 (k,) ns, or None for time of arrival
    names    distinct stream names; codes int32 (k,), index into them
    describe digest of the line of event i, and its place for people
    """

    count: int
    sizes: NDArray[np.float64]
    stamps: NDArray[np.int64] | None
    names: list[str]
    codes: NDArray[np.int32]
    describe: Callable[[int], tuple[str, str]]
    skipped: dict[str, int] = field(default_factory=dict)
    rejected: dict[str, int] = field(default_factory=dict)
    samples: tuple[RejectedLine, ...] = ()


@dataclass(frozen=True, slots=True)
class RejectedLine:
    """A line kept as a sample: reason, byte position in its file, text."""

    reason: str
    position: int
    text: bytes


@dataclass(frozen=True, slots=True, kw_only=True)
class Arrived:
    """Lines of a chain, and the bookmark behind them."""

    feed: str
    chain: str
    lines: Lines
    bookmark: str
    now: int


@dataclass(frozen=True, slots=True, kw_only=True)
class ChainSeen:
    """A chain exists: whether all its known lines are read, and since when nothing was written to it."""

    feed: str
    chain: str
    at_end: bool
    quiet_since: int | None
    now: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Ended:
    """No chain will ever give another line: end of file counts as the end of time."""

    now: int


@dataclass(frozen=True, slots=True, kw_only=True)
class CommitDue:
    """Hand out everything learnt since the last commit."""

    now: int


class Outcome(msgspec.Struct, frozen=True, kw_only=True):
    """What the worker made of a window; `failure` says in words why it made nothing."""

    job: RefitJob
    seed: int
    panes: int = 0
    window_digest: str = ""
    judgement: str | None = None
    comparison: str | None = None
    watched: Watched | None = None
    measured: Measured | None = None
    seconds: float = 0.0
    versions: str = ""
    failure: str | None = None


@dataclass(frozen=True, slots=True, kw_only=True)
class Judged:
    """A refit came back from the worker."""

    outcome: Outcome
    now: int


@dataclass(frozen=True, slots=True, kw_only=True)
class Asked:
    """A person asks for something: `act` is JSON of monitor.engine.alarming.Act, `alarm` that of its alarm, if any."""

    request: str
    act: str
    alarm: str | None
    now: int


Stimulus = Asked | Arrived | ChainSeen | Ended | CommitDue | Judged
