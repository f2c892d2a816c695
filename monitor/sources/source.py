"""What a place that lines come from must do, and the blocks it gives."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import Protocol, runtime_checkable

import msgspec

from monitor.rejects import Rejected

MAX_LINE = 1 << 20
"""Longest line in bytes; a longer one is rejected without being held in memory."""


class FollowFiles(msgspec.Struct, frozen=True, kw_only=True):
    """Follow the files that match; they may rotate, appear later, be compressed.

    patterns  globs; relative ones are meant from base; ** crosses folders
    base      the folder of the settings file
    max_line  longest line in bytes
    """

    patterns: tuple[str, ...]
    base: Path
    max_line: int = MAX_LINE


class ReadStandardInput(msgspec.Struct, frozen=True, kw_only=True):
    """Read lines from an open file descriptor (0: standard input) until its end."""

    fileno: int = 0
    max_line: int = MAX_LINE


class ListenForBatches(msgspec.Struct, frozen=True, kw_only=True):
    """Take batches of lines over HTTP; each is acknowledged once it is committed.

    address   what people call it, and the chain's name
    host      numeric address; port
    max_line  longest line in bytes
    """

    address: str
    host: str
    port: int
    max_line: int = MAX_LINE


class ListenForLines(msgspec.Struct, frozen=True, kw_only=True):
    """Take bare lines over TCP (host, port) or a socket file (path); at most once."""

    address: str
    host: str = ""
    port: int = 0
    path: str = ""
    max_line: int = MAX_LINE


Feed = FollowFiles | ReadStandardInput | ListenForBatches | ListenForLines


class Moments(Protocol):
    """What a listening source needs of the clock: ns since 1970 UTC, and seconds that never jump."""

    def now(self) -> int:
        """The moment, ns since 1970 UTC."""
        ...

    def monotonic(self) -> float:
        """Real seconds from some fixed moment."""
        ...


@dataclass(frozen=True, slots=True)
class Block:
    """Whole lines of one chain, in its order.

    chain            stable name of the chain: the followed path through its rotations, "-" for standard input
    data             whole lines, each ended by a newline (added to the last line of an ended file);
                     may be empty when only the bookmark, a rejected line or the end is news
    offset           byte position of data[0] in the file's generation (uncompressed)
    first            data starts with the first line of the file's generation
    header           that first line without its newline, or None when data is empty; when the file was cut off
                     in place and its writer went on without the line, the one from before the cut
    bookmark         where to resume after this block, opaque text; commit it with what the block holds
    rejected         samples of lines that the source itself refused; offsets relative to data[0]
    rejected_counts  reason -> lines refused by the source: they are not in data
    holes            NUL bytes skipped before data (left by a truncation or a power cut; they are no line)
    ended            the chain is finished for good; nothing will follow
    """

    chain: str
    data: bytes
    offset: int
    first: bool
    header: bytes | None
    bookmark: str
    rejected: tuple[Rejected, ...] = ()
    rejected_counts: Mapping[str, int] = field(default_factory=dict)
    holes: int = 0
    ended: bool = False


@dataclass(frozen=True, slots=True)
class ChainStatus:
    """How far one chain is.

    at_end    nothing unread is known (a partial last line counts as nothing)
    path      the file being read now, None when there is none
    size      its size in bytes as last seen (compressed files: the uncompressed position)
    position  bytes of it that were delivered
    modified  when the file was last written (ns since 1970 UTC, real time), None when unknown
    """

    name: str
    at_end: bool
    path: str | None
    size: int
    position: int
    modified: int | None = None


class Source(Protocol):
    """A place that lines come from. Never blocks; holds about `limit` bytes at most."""

    def poll(self, limit: int) -> list[Block]:
        """New lines, about `limit` bytes at most, fair over the chains; [] when there is nothing new."""
        ...

    def chains(self) -> list[ChainStatus]:
        """All chains known now, those without new lines too."""
        ...

    def finish(self) -> list[Block]:
        """Take the ends of the files as their ends: what is still unread, final partial lines included."""
        ...

    def troubles(self) -> list[str]:
        """Sentences for people about what went wrong since the last call; each told once until it changes."""
        ...

    def close(self) -> None:
        """Give back files. Positions are in the bookmarks; nothing is lost."""
        ...


@runtime_checkable
class Answering(Protocol):
    """A source whose senders wait until their lines are committed."""

    def committed(self, bookmark: str) -> None:
        """Everything up to this bookmark is on disk: tell the senders."""
        ...

    def awaited(self) -> bool:
        """Somebody waits for the commit of lines that `poll` gave."""
        ...

    def receiving(self) -> bool:
        """More is just coming in: polling again at once is worth it."""
        ...
