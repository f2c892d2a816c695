"""A listening source with its consumer, senders on the loopback, and a clock that a test moves."""

from __future__ import annotations

import socket
import time
from collections.abc import Callable
from pathlib import Path

from monitor.sources import ListenForBatches, ListenForLines, open_source
from monitor.sources.http_lines import HttpSource
from monitor.sources.source import MAX_LINE, Block, Source


class Moments:
    """Stands still unless it is moved."""

    def __init__(self) -> None:
        self.seconds = 1_800_000_000.0

    def now(self) -> int:
        return int(self.seconds * 1e9)

    def monotonic(self) -> float:
        return self.seconds


def free_port() -> int:
    with socket.socket() as probe:
        probe.bind(("127.0.0.1", 0))
        return int(probe.getsockname()[1])


class Wire:
    """Polls the source; keeps what it gave, as a store would: `commit` keeps lines and bookmark together."""

    def __init__(self, *, http: bool, path: Path | None = None, max_line: int = MAX_LINE) -> None:
        self.port = 0 if path else free_port()
        self.moments = Moments()
        address = f"unix://{path}" if path else f"{'http' if http else 'tcp'}://127.0.0.1:{self.port}"
        if http:
            self.feed = ListenForBatches(address=address, host="127.0.0.1", port=self.port, max_line=max_line)
        else:
            host = "" if path else "127.0.0.1"
            self.feed = ListenForLines(
                address=address, host=host, port=self.port, path=str(path or ""), max_line=max_line
            )
        self.path = path
        self.committed: list[Block] = []
        self.polled: list[Block] = []
        self.bookmark: str | None = None
        self.senders: list[socket.socket] = []
        self.source = self._open()

    def _open(self) -> Source:
        known = {} if self.bookmark is None else {self.feed.address: self.bookmark}
        return open_source(self.feed, known, self.moments)

    def connect(self) -> socket.socket:
        if self.path is not None:
            sender = socket.socket(socket.AF_UNIX)
            sender.connect(str(self.path))
        else:
            sender = socket.create_connection(("127.0.0.1", self.port))
        sender.settimeout(10)
        self.senders.append(sender)
        return sender

    def poll(self, limit: int = 1 << 20) -> list[Block]:
        blocks = self.source.poll(limit)
        self.polled += blocks
        return blocks

    def commit(self) -> None:
        """What was polled is on disk; the senders are told."""
        if self.polled:
            self.committed += self.polled
            self.bookmark = self.polled[-1].bookmark
            self.polled = []
            if isinstance(self.source, HttpSource):
                self.source.committed(self.bookmark)

    def crash(self) -> None:
        """What was polled and not committed is gone."""
        self.source.close()
        self.polled = []
        self.source = self._open()

    def until(self, condition: Callable[[], object]) -> None:
        """Poll until a condition holds."""
        end = time.monotonic() + 20
        while not condition():
            assert time.monotonic() < end, "it did not come to that"
            self.poll()
            time.sleep(0.0005)

    def data(self) -> bytes:
        return b"".join(block.data for block in [*self.committed, *self.polled])

    def rejected(self) -> dict[str, int]:
        counts: dict[str, int] = {}
        for block in [*self.committed, *self.polled]:
            for reason, count in block.rejected_counts.items():
                counts[reason] = counts.get(reason, 0) + count
        return counts

    def close(self) -> None:
        for sender in self.senders:
            sender.close()
        self.source.close()


def request(body: bytes, key: str | None = "a", *, head: str = "POST /lines HTTP/1.1", extra: str = "") -> bytes:
    named = "" if key is None else f'Idempotency-Key: "{key}"\r\n'
    return f"{head}\r\nHost: x\r\n{named}{extra}Content-Length: {len(body)}\r\n\r\n".encode() + body


def answer(sender: socket.socket) -> tuple[int, str]:
    """Status and text of one answer."""
    data = b""
    while b"\r\n\r\n" not in data:
        more = sender.recv(4096)
        if not more:
            raise ConnectionError("closed without an answer")
        data += more
    head, _, body = data.partition(b"\r\n\r\n")
    length = int(head.lower().split(b"content-length: ")[1].split(b"\r\n")[0])
    while len(body) < length:
        body += sender.recv(4096)
    assert len(body) == length
    return int(head.split()[1]), body.decode()
