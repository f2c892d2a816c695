"""Lines from an open file descriptor: standard input, a pipe.

A pipe cannot be read twice, so its lines are counted at most once: what was read but not committed before a
crash is gone. The bookmark only tells how far it was.
"""

from __future__ import annotations

import os
import select

from monitor.rejects import OVER_LONG, Rejected
from monitor.sources.cutting import Taken, take
from monitor.sources.source import Block, ChainStatus, ReadStandardInput

CHAIN = "-"
_HEADER_BYTES = 1 << 16


class StreamSource:
    """A Source over one file descriptor. See source.Source for the methods."""

    def __init__(self, feed: ReadStandardInput) -> None:
        self._fd, self._max_line = feed.fileno, feed.max_line
        self._held = b""
        self._position = 0
        self._skipping = self._at_end = self._ended = self._told_end = False
        self._header: bytes | None = None
        self._trouble: str | None = None

    def poll(self, limit: int) -> list[Block]:
        """New lines, about `limit` bytes at most; at the end of the stream a last block says so."""
        room = (limit if len(self._held) < limit else self._max_line + 2) - len(self._held)
        while room > 0 and not self._ended and (data := self._read(room)):
            self._held += data
            room -= len(data)
        blocks = self._cut(final=self._ended)
        self._at_end = not blocks
        if self._ended and not self._held and not self._told_end:
            self._told_end = True
            blocks.append(self._block(Taken(0, 0, b"", None, 0, False), ended=True))
        return blocks

    def chains(self) -> list[ChainStatus]:
        """The one chain."""
        read = self._position + len(self._held)
        return [ChainStatus(CHAIN, self._told_end or self._at_end, "standard input", read, self._position)]

    def finish(self) -> list[Block]:
        """What has arrived but was not delivered, a line without newline included; nothing more is read."""
        self._ended = True
        return self.poll(1 << 20)

    def troubles(self) -> list[str]:
        """What went wrong since the last call."""
        told, self._trouble = self._trouble, None
        return [] if told is None else [told]

    def close(self) -> None:
        """The descriptor is the caller's; it stays open."""

    def _read(self, count: int) -> bytes:
        """What is there now; nothing is waited for."""
        try:
            if not select.select([self._fd], [], [], 0)[0]:
                return b""
            data = os.read(self._fd, count)
        except OSError as error:
            self._trouble = f"standard input cannot be read: {(error.strerror or str(error)).lower()}"
            data = b""
        self._ended = not data
        return data

    def _cut(self, *, final: bool) -> list[Block]:
        blocks = []
        while self._held:
            taken = take(self._held, skipping=self._skipping, max_line=self._max_line, final=final)
            if not taken.consumed:
                break
            if self._header is None and self._position == 0:
                self._header = self._held[:_HEADER_BYTES].split(b"\n", 1)[0].removesuffix(b"\r")
            self._held = self._held[taken.consumed :]
            self._position += taken.consumed
            self._skipping = taken.skipping
            if taken.data or taken.refused is not None:
                blocks.append(self._block(taken, ended=False))
        return blocks

    def _block(self, taken: Taken, *, ended: bool) -> Block:
        offset = self._position - taken.consumed + taken.start
        refused = taken.refused
        return Block(
            chain=CHAIN,
            data=taken.data,
            offset=offset,
            first=offset == 0 and bool(taken.data),
            header=self._header if taken.data else None,
            bookmark=f'{{"position":{self._position}}}',
            rejected=() if refused is None else (Rejected(OVER_LONG, 0, refused),),
            rejected_counts={} if refused is None else {OVER_LONG: 1},
            holes=taken.holes,
            ended=ended,
        )
