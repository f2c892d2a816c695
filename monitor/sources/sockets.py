"""Bare lines over TCP or a socket file: at most once.

Nothing is acknowledged, so what was sent but not committed before a crash is gone, and a sender cannot know.
Where every line counts, let the sender write to a file that the daemon follows, or send batches over HTTP
(monitor.sources.http_lines). The lines of all connections are one chain, in the order in which they came; a
CSV header is each connection's own first line. A line that its sender left unended is rejected, not taken for
a whole one: half of "12345" is a number too.

Bounds: CLIENTS connections; of each, one unended line of `max_line` bytes and one portion just read. A sender
whose line grows beyond that, or stays unended for LINE_SECONDS, is cut; the line is counted as rejected.
"""

from __future__ import annotations

import contextlib
import selectors
import socket

import msgspec

from monitor.rejects import OVER_LONG, UNENDED, Rejected
from monitor.sources.cutting import Taken, take
from monitor.sources.listening import Listener
from monitor.sources.source import Block, ChainStatus, ListenForLines, Moments

CLIENTS = 64
PORTION = 1 << 18
LINE_SECONDS = 30.0
_HEADER_BYTES = 1 << 16
_SAMPLE = 200


class _Position(msgspec.Struct, frozen=True):
    position: int = 0


class _Client:
    """One connection.

    held      what came of a line that is not ended; since, when its first byte came
    header    the connection's first line; begun, some of its lines were delivered
    """

    def __init__(self, connection: socket.socket) -> None:
        self.connection = connection
        self.held = b""
        self.since = 0.0
        self.header: bytes | None = None
        self.begun = False


class LineSocketSource:
    """A Source over a listening socket. See source.Source for the methods."""

    def __init__(self, feed: ListenForLines, bookmark: str | None, moments: Moments) -> None:
        """Listen. Raises SourceError."""
        self._chain, self._max_line, self._moments = feed.address, feed.max_line, moments
        self._position = msgspec.json.decode(bookmark, type=_Position).position if bookmark else 0
        self._listener = Listener(feed.address, feed.host, feed.port, feed.path)
        self._selector = selectors.DefaultSelector()
        self._selector.register(self._listener.socket, selectors.EVENT_READ)
        self._clients: dict[socket.socket, _Client] = {}
        self._troubles: list[str] = []
        self._at_end = True

    def poll(self, limit: int) -> list[Block]:
        """New lines, about `limit` bytes at most."""
        self._accept()
        blocks: list[Block] = []
        for key, _ in self._selector.select(0):
            if key.data is not None and sum(len(block.data) for block in blocks) < limit:
                blocks += self._read(key.data)
        now = self._moments.monotonic()
        for client in [c for c in self._clients.values() if c.held and now - c.since > LINE_SECONDS]:
            self._troubles.append(f"a sender left a line unended for {LINE_SECONDS:g} s and was cut")
            blocks += self._end(client)
        self._at_end = not blocks
        return blocks

    def chains(self) -> list[ChainStatus]:
        """The one chain."""
        return [ChainStatus(self._chain, self._at_end, None, self._position, self._position)]

    def finish(self) -> list[Block]:
        """What has arrived; nobody is waited for."""
        blocks: list[Block] = []
        while more := self.poll(1 << 20):
            blocks += more
        return blocks

    def troubles(self) -> list[str]:
        """What went wrong since the last call."""
        told, self._troubles = self._troubles, []
        return told

    def close(self) -> None:
        """Cut all connections and stop listening."""
        for client in list(self._clients.values()):
            self._drop(client)
        self._selector.close()
        self._listener.close()

    def _accept(self) -> None:
        while (connection := self._listener.accept()) is not None:
            if len(self._clients) >= CLIENTS:
                connection.close()
                self._troubles.append(f"more than {CLIENTS} senders at once; one was turned away")
                continue
            client = _Client(connection)
            self._clients[connection] = client
            self._selector.register(connection, selectors.EVENT_READ, client)

    def _read(self, client: _Client) -> list[Block]:
        try:
            data = client.connection.recv(PORTION)
        except BlockingIOError:
            return []
        except OSError:  # reset: what was whole is delivered already
            data = b""
        if not data:
            return self._end(client)
        if not client.held:
            client.since = self._moments.monotonic()
        return self._lines(client, client.held + data)

    def _lines(self, client: _Client, data: bytes) -> list[Block]:
        """Whole lines out of what came; the unended rest stays with its client."""
        if client.header is None and b"\n" in data:
            client.header = data[:_HEADER_BYTES].split(b"\n", 1)[0].removesuffix(b"\r")
        blocks: list[Block] = []
        cut_off = False
        while data and not cut_off:
            taken = take(data, skipping=False, max_line=self._max_line, final=False)
            if not taken.consumed:
                break
            data = data[taken.consumed :]
            blocks.append(self._block(client, taken, OVER_LONG))
            cut_off = taken.skipping
        if blocks:
            client.since = self._moments.monotonic()
        client.held = data
        if cut_off:
            self._troubles.append(f"a sender's line was longer than {self._max_line} bytes and was cut")
            self._drop(client)
        return blocks

    def _end(self, client: _Client) -> list[Block]:
        """The connection is over; an unended line is counted."""
        held = client.held
        self._drop(client)
        if not held:
            return []
        return [self._block(client, Taken(len(held), 0, b"", held[:_SAMPLE], 0, False), UNENDED)]

    def _block(self, client: _Client, taken: Taken, reason: str) -> Block:
        self._position += taken.consumed
        refused = taken.refused
        first = bool(taken.data) and not client.begun
        client.begun = client.begun or first
        return Block(
            chain=self._chain,
            data=taken.data,
            offset=self._position - taken.consumed + taken.start,
            first=first,
            header=client.header if taken.data else None,
            bookmark=msgspec.json.encode(_Position(self._position)).decode(),
            rejected=() if refused is None else (Rejected(reason, 0, refused),),
            rejected_counts={} if refused is None else {reason: 1},
            holes=taken.holes,
        )

    def _drop(self, client: _Client) -> None:
        if self._clients.pop(client.connection, None) is not None:
            self._selector.unregister(client.connection)
            with contextlib.suppress(OSError):
                client.connection.close()
