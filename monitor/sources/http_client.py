"""One connection of an HTTP sender: its request, its answer, its deadlines. Nothing here waits."""

from __future__ import annotations

import contextlib
import http
import socket
from dataclasses import dataclass

import msgspec

from monitor.sources.http_request import RequestReader

REQUEST_SECONDS = 30.0
IDLE_SECONDS = 60.0
LEAVING_SECONDS = 2.0
"""A refused sender may still be sending: what comes is read and dropped for so long, so that it sees the answer."""


@dataclass(frozen=True, slots=True)
class Answer:
    """Status and sentence; or, as `counted` makes it, a small JSON document."""

    status: int
    text: str
    retry_after: int | None = None
    allow: bool = False
    document: bool = False

    @classmethod
    def counted(cls, lines: int, *, repeated: bool) -> Answer:
        """The batch is on disk; repeated: it was before."""
        return cls(200, msgspec.json.encode({"lines": lines, "repeated": repeated}).decode(), document=True)

    def encode(self, *, keep_alive: bool) -> bytes:
        """The bytes to send."""
        body = f"{self.text}\n".encode()
        kind = "application/json" if self.document else "text/plain; charset=utf-8"
        lines = [
            f"HTTP/1.1 {self.status} {http.HTTPStatus(self.status).phrase}",
            f"Content-Type: {kind}",
            f"Content-Length: {len(body)}",
            f"Connection: {'keep-alive' if keep_alive else 'close'}",
        ]
        if self.retry_after is not None:
            lines.append(f"Retry-After: {self.retry_after}")
        if self.allow:
            lines.append("Allow: POST")
        return "\r\n".join([*lines, "", ""]).encode() + body


class Client:
    """A connection.

    judged   the head of the request at hand was found good
    waiting  its batch is not yet committed
    leaving  the answer ends the connection
    since    when the request at hand began, or when it began to have none
    """

    def __init__(self, connection: socket.socket, now: float, *, head_limit: int, body_limit: int) -> None:
        self.connection = connection
        self.judged = self.waiting = self.leaving = False
        self.since = now
        self._limits = (head_limit, body_limit)
        self._request = self._fresh()
        self._out = b""
        self._early = b""
        self._gone = False

    def _fresh(self) -> RequestReader:
        return RequestReader(head_limit=self._limits[0], body_limit=self._limits[1])

    @property
    def idle(self) -> bool:
        """There is no request."""
        return not (self.in_request or self.waiting or self.leaving or self._out)

    @property
    def blocked(self) -> bool:
        """An answer could not be sent whole: the other side does not read."""
        return bool(self._out)

    @property
    def in_request(self) -> bool:
        """A request has begun and is not whole."""
        return self._request.started and not self.waiting and not self.leaving

    @property
    def held(self) -> int:
        """Bytes held for requests; those of a whole one are its batch's."""
        return len(self._early) + (0 if self.waiting or self.leaving else self._request.held)

    @property
    def finished(self) -> bool:
        """Nothing more can come of it."""
        return self._gone

    def overdue(self, now: float) -> bool:
        """It takes too long: to send a request, to read an answer, to leave, or to begin another request."""
        if self.waiting:
            return False
        seconds = LEAVING_SECONDS if self.leaving else REQUEST_SECONDS if not self.idle else IDLE_SECONDS
        return now - self.since > seconds

    def receive(self, count: int) -> bytes | None:
        """What has come; b"" at the end, None when there is nothing now."""
        if self._early:
            early, self._early = self._early, b""
            return early
        try:
            return self.connection.recv(count)
        except BlockingIOError:
            return None
        except OSError:
            return b""

    def feed(self, data: bytes, now: float) -> RequestReader:
        """Bytes for the request at hand. Raises Refusal."""
        if not self._request.started:
            self.since = now
        self._request.feed(data)
        return self._request

    def go_ahead(self) -> None:
        """Tell a sender who asked first that the body is welcome."""
        self._out += b"HTTP/1.1 100 Continue\r\n\r\n"
        self.send()

    def wait(self) -> None:
        """The request is whole; its answer comes with the commit."""
        self.waiting = True

    def answer(self, answer: Answer) -> None:
        """Send an answer, or begin to. A refusal ends the connection."""
        keep = answer.status == 200 and self._request.head is not None and self._request.head.keep_alive
        self._out += answer.encode(keep_alive=keep)
        self.leaving = not keep
        self.send()

    @property
    def early(self) -> bool:
        """Bytes of the next request have come already; the next `receive` gives them."""
        return bool(self._early)

    def next_request(self, now: float) -> None:
        """Be ready for the next request."""
        self.waiting = self.judged = False
        self.since = now
        self._early = self._request.rest
        self._request = self._fresh()
        if self.leaving:
            self.leave(now)

    def leave(self, now: float) -> None:
        """Send no more after the answer; what still comes is dropped for a little while."""
        self.leaving, self.since, self._early = True, now, b""
        self._request = self._fresh()
        if not self._out:
            with contextlib.suppress(OSError):
                self.connection.shutdown(socket.SHUT_WR)

    def send(self) -> None:
        """Send what can be sent now."""
        if not self._out:
            return
        try:
            sent = self.connection.send(self._out)
        except BlockingIOError:
            return
        except OSError:
            self._gone, self._out = True, b""
            return
        self._out = self._out[sent:]
        if not self._out and self.leaving and not self.waiting:
            with contextlib.suppress(OSError):
                self.connection.shutdown(socket.SHUT_WR)

    def close(self) -> None:
        """Close the connection."""
        with contextlib.suppress(OSError):
            self.connection.close()
