"""Which batches were counted: their ids, kept in the bookmark that is committed with their lines.

A batch that is sent again, because its acknowledgement was lost, is known by its id and not counted twice. The
memory is bounded: the last MOST_BATCHES ids, none older than KEPT. One id takes 24 characters of the bookmark:
9 bytes of the id's digest (two of 10 000 ids alike: one chance in 1e14), 5 of the body's, 4 of the time.
"""

from __future__ import annotations

import base64
from collections import deque
from hashlib import blake2b

import msgspec

from monitor.errors import SourceError

MOST_BATCHES = 10_000
KEPT = 86_400
"""Seconds after which an id is forgotten: a sender must not retry for longer."""
_ENTRY, _ID = 24, 12
_VERSION = 1


class _Bookmark(msgspec.Struct, frozen=True, kw_only=True):
    """taken: batches so far; position: bytes of them; batches: the entries, oldest first."""

    version: int
    taken: int
    position: int
    batches: str


class _Taken(msgspec.Struct, frozen=True):
    taken: int


def taken_of(bookmark: str) -> int:
    """The number of batches up to a bookmark."""
    return msgspec.json.decode(bookmark, type=_Taken).taken


class CountedBatches:
    """Batches counted so far.

    taken     how many, ever
    position  bytes of all their bodies
    """

    def __init__(self, bookmark: str | None, chain: str) -> None:
        """Resume at a bookmark. Raises SourceError when it cannot be read."""
        self.taken = self.position = 0
        self._entries: deque[str] = deque()
        self._known: dict[str, str] = {}
        if bookmark:
            try:
                held = msgspec.json.decode(bookmark, type=_Bookmark)
            except msgspec.DecodeError as error:
                raise SourceError(f"{chain}: the stored batch ids cannot be read ({error})") from None
            if held.version != _VERSION or len(held.batches) % _ENTRY:
                raise SourceError(f"{chain}: the stored batch ids were written by a later version of the program")
            self.taken, self.position = held.taken, held.position
            for i in range(0, len(held.batches), _ENTRY):
                self._keep(held.batches[i : i + _ENTRY])

    def __len__(self) -> int:
        return len(self._entries)

    def knows(self, batch_id: str, body: bytes) -> bool | None:
        """Whether a batch was counted; None when one with this id but other lines was."""
        entry = self._known.get(_digest(batch_id.encode(), 9))
        if entry is None:
            return False
        return True if _of_body(entry) == _of_body(_entry(batch_id, body, 0)) else None

    def count(self, batch_id: str, body: bytes, now: int) -> str:
        """Count a batch at a moment (ns); the bookmark with it."""
        seconds = now // 1_000_000_000
        self.taken += 1
        self.position += len(body)
        self._keep(_entry(batch_id, body, seconds))
        while len(self._entries) > MOST_BATCHES or _seconds(self._entries[0]) < seconds - KEPT:
            entry = self._entries.popleft()
            if self._known.get(entry[:_ID]) is entry:
                del self._known[entry[:_ID]]
        held = _Bookmark(version=_VERSION, taken=self.taken, position=self.position, batches="".join(self._entries))
        return msgspec.json.encode(held).decode()

    def _keep(self, entry: str) -> None:
        self._entries.append(entry)
        self._known[entry[:_ID]] = entry


def _digest(data: bytes, size: int) -> str:
    return base64.b64encode(blake2b(data, digest_size=size).digest()).decode()


def _entry(batch_id: str, body: bytes, seconds: int) -> str:
    """Nine bytes are exactly twelve characters, so the id's part can be compared as text."""
    body_digest = blake2b(body, digest_size=5).digest()
    return _digest(batch_id.encode(), 9) + base64.b64encode(body_digest + seconds.to_bytes(4, "big")).decode()


def _of_body(entry: str) -> bytes:
    return base64.b64decode(entry[_ID:])[:5]


def _seconds(entry: str) -> int:
    return int.from_bytes(base64.b64decode(entry[_ID:])[5:], "big")
