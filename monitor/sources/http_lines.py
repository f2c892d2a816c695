"""Batches of lines over HTTP: POST /lines, acknowledged after the commit, counted once.

The sender gives each batch an id in the header Idempotency-Key (IETF draft-ietf-httpapi-idempotency-key-header)
and sends it again, with the same id, until it is answered. The answer 200 comes when the lines are committed; a
batch that was counted before is answered 200 at once and not counted again, after a crash too, since the ids
are part of the bookmark (monitor.sources.batches). The same id with other lines is refused (422). A batch is
one block; it is counted whole or not at all. A CSV batch begins with its own header line. All batches of an
address are one chain, in the order in which they were received whole.

Bounds: CLIENTS connections (and as many that are being turned away); HELD bytes in batches that are coming in
or not yet committed (429 beyond that), BATCHES of them; one request may take REQUEST_SECONDS. A request with an
Origin header comes from a page in a browser, not from a sender of lines, and is refused.
"""

from __future__ import annotations

import re
import selectors
import socket
from collections import deque

from monitor.rejects import OVER_LONG, SAMPLE_BYTES, Rejected
from monitor.sources.batches import CountedBatches, taken_of
from monitor.sources.http_client import Answer, Client
from monitor.sources.http_request import Head, Refusal
from monitor.sources.listening import Listener
from monitor.sources.source import Block, ChainStatus, ListenForBatches, Moments

CLIENTS = 64
BATCHES = 256
HEAD = 16 << 10
BODY = 4 << 20
HELD = 32 << 20
PATH = "/lines"
KEY = "idempotency-key"
_KEY_FORM = re.compile(r"[\x21-\x7e]{1,200}")
_PORTION = 1 << 18
_FLOWING = 1 << 14


class _Batch:
    """A batch that is not yet committed, and who waits for it. number: its place among those taken, once polled."""

    def __init__(self, batch_id: str, body: bytes) -> None:
        self.batch_id, self.body, self.number = batch_id, body, 0
        self.size, self.lines = len(body), body.count(b"\n")
        self.waiting: list[Client] = []


class HttpSource:
    """A Source over HTTP. See source.Source and source.Answering for the methods."""

    def __init__(self, feed: ListenForBatches, bookmark: str | None, moments: Moments) -> None:
        """Listen. Raises SourceError."""
        self._chain, self._max_line, self._moments = feed.address, feed.max_line, moments
        self._counted = CountedBatches(bookmark, feed.address)
        self._listener = Listener(feed.address, feed.host, feed.port, "")
        self._selector = selectors.DefaultSelector()
        self._selector.register(self._listener.socket, selectors.EVENT_READ)
        self._clients: dict[socket.socket, Client] = {}
        self._ready: deque[_Batch] = deque()
        self._open: dict[str, _Batch] = {}  # not yet committed, by id
        self._polled: deque[_Batch] = deque()
        self._troubles: list[str] = []
        self._received = 0

    # -- Source

    def poll(self, limit: int) -> list[Block]:
        """The batches that came in whole, about `limit` bytes."""
        self._received = 0
        self._accept()
        early = [client for client in self._clients.values() if client.early]
        ready = [key.data for key, _ in self._selector.select(0) if key.data is not None]
        for client in dict.fromkeys([*early, *ready]):
            self._read(client)
        self._tend()
        blocks: list[Block] = []
        size = 0
        while self._ready and size < limit:
            batch = self._ready.popleft()
            size += batch.size
            blocks.append(self._block(batch))
        return blocks

    def chains(self) -> list[ChainStatus]:
        """The one chain."""
        position = self._counted.position
        return [ChainStatus(self._chain, not self._ready, None, position, position)]

    def finish(self) -> list[Block]:
        """The batches that are there; nobody is waited for."""
        blocks: list[Block] = []
        while more := self.poll(1 << 20):
            blocks += more
        return blocks

    def troubles(self) -> list[str]:
        """What went wrong since the last call."""
        told, self._troubles = self._troubles, []
        return told

    def close(self) -> None:
        """Tell who still waits that nothing is acknowledged, and stop listening."""
        for client in list(self._clients.values()):
            if client.waiting:
                client.answer(Answer(503, "Stopping; not acknowledged. Send the batch again with the same id."))
            self._drop(client)
        self._selector.close()
        self._listener.close()

    # -- Answering

    def committed(self, bookmark: str) -> None:
        """Answer the senders of all batches up to this bookmark."""
        number = taken_of(bookmark)
        while self._polled and self._polled[0].number <= number:
            batch = self._polled.popleft()
            del self._open[batch.batch_id]
            for client in batch.waiting:
                self._answer(client, Answer.counted(batch.lines, repeated=False))

    def awaited(self) -> bool:
        """A polled batch is not yet committed."""
        return bool(self._polled)

    def receiving(self) -> bool:
        """The last poll took in enough to expect more."""
        return self._received >= _FLOWING or any(client.early for client in self._clients.values())

    # -- connections

    def _accept(self) -> None:
        while (connection := self._listener.accept()) is not None:
            client = Client(connection, self._moments.monotonic(), head_limit=HEAD, body_limit=BODY)
            if sum(not c.leaving for c in self._clients.values()) >= CLIENTS and not self._make_room():
                self._troubles.append(f"more than {CLIENTS} senders at once; one was turned away")
                client.answer(Answer(503, f"More than {CLIENTS} senders at once; try again later.", retry_after=1))
                client.leave(self._moments.monotonic())
                if len(self._clients) >= 2 * CLIENTS:
                    client.close()
                    continue
            self._clients[connection] = client
            self._selector.register(connection, selectors.EVENT_READ, client)

    def _make_room(self) -> bool:
        """Close the connection that has been without a request for longest, if there is one."""
        idle = [c for c in self._clients.values() if c.idle]
        if idle:
            self._drop(min(idle, key=lambda c: c.since))
        return bool(idle)

    def _tend(self) -> None:
        """Send what could not be sent at once; end what takes too long."""
        now = self._moments.monotonic()
        for client in list(self._clients.values()):
            client.send()
            if client.finished or client.overdue(now):
                if client.in_request and not client.finished:
                    client.answer(Answer(408, "The request took too long."))
                self._drop(client)

    def _drop(self, client: Client) -> None:
        if self._clients.pop(client.connection, None) is not None:
            self._selector.unregister(client.connection)
            client.close()

    def _read(self, client: Client) -> None:
        if client.waiting or client.blocked:
            return  # one request at a time, and none while its answer is not read: the rest stays in the kernel
        data = client.receive(_PORTION)
        if data is None:
            return
        if not data:
            self._drop(client)
            return
        self._received += len(data)
        if not client.leaving:
            self._feed(client, data)

    def _feed(self, client: Client, data: bytes) -> None:
        """Bytes of a request; every refusal is an answer."""
        now = self._moments.monotonic()
        try:
            request = client.feed(data, now)
            if request.head is not None and not client.judged:
                self._judge_head(request.head)
                client.judged = True
                if request.head.expects_continue:
                    client.go_ahead()
                request.go_on()
            if sum(c.held for c in self._clients.values()) + sum(b.size for b in self._open.values()) > HELD:
                raise Refusal(429, "Too much is waiting to be committed; send the batch again a little later.")
            if request.complete:
                assert request.head is not None
                self._take(client, request.head.headers[KEY].strip('"'), request.body())
        except Refusal as refusal:
            # What follows of the request would be read as the next one: the connection ends.
            retry = 1 if refusal.status == 429 else None
            client.answer(Answer(refusal.status, refusal.sentence, retry_after=retry, allow=refusal.status == 405))
            client.leave(now)

    def _judge_head(self, head: Head) -> None:
        """Refuse before the body is read. Raises Refusal."""
        if head.target.split("?")[0] != PATH:
            raise Refusal(404, f"Lines are taken at {PATH}.")
        if head.method != "POST":
            raise Refusal(405, f"Send lines with POST {PATH}.")
        if "origin" in head.headers:
            raise Refusal(403, "Lines are not taken from pages in a browser.")
        if head.headers.get("content-encoding", "identity").lower() != "identity":
            raise Refusal(415, "Send the lines uncompressed.")
        if head.length is None and not head.chunked:
            raise Refusal(411, "Say how long the batch is (Content-Length), or send it in chunks.")
        key = head.headers.get(KEY)
        if key is None or not _KEY_FORM.fullmatch(key.strip('"')):
            raise Refusal(
                400,
                "Give each batch an id of its own in the header Idempotency-Key (1 to 200 visible characters), and the "
                "same id when you send it again: that is how it is counted once.",
            )

    # -- batches

    def _take(self, client: Client, batch_id: str, body: bytes) -> None:
        """A whole batch is there: answer it, or let its sender wait for the commit. Raises Refusal."""
        if body and not body.endswith(b"\n"):
            body += b"\n"  # the length says that the line is whole
        other = Refusal(422, "This id was used for a batch with other lines; a new batch needs a new id.")
        batch = self._open.get(batch_id)
        if batch is not None:
            if batch.body != body:
                raise other
        else:
            known = self._counted.knows(batch_id, body)
            if known is None:
                raise other
            if known:
                self._answer(client, Answer.counted(body.count(b"\n"), repeated=True))
                return
            if len(self._open) >= BATCHES:
                raise Refusal(429, "Too many batches are waiting to be committed; send this one again a little later.")
            batch = self._open[batch_id] = _Batch(batch_id, body)
            self._ready.append(batch)
        batch.waiting.append(client)
        client.wait()

    def _answer(self, client: Client, answer: Answer) -> None:
        client.answer(answer)
        client.next_request(self._moments.monotonic())

    def _block(self, batch: _Batch) -> Block:
        offset = self._counted.position
        bookmark = self._counted.count(batch.batch_id, batch.body, self._moments.now())
        batch.number = self._counted.taken
        self._polled.append(batch)
        data, refused, count = without_over_long(batch.body, self._max_line)
        return Block(
            chain=self._chain,
            data=data,
            offset=offset,
            first=bool(data),
            header=data[: data.find(b"\n")].removesuffix(b"\r") if data else None,
            bookmark=bookmark,
            rejected=() if refused is None else (Rejected(OVER_LONG, 0, refused),),
            rejected_counts={} if refused is None else {OVER_LONG: count},
        )


def without_over_long(body: bytes, max_line: int) -> tuple[bytes, bytes | None, int]:
    """The lines that are not too long; the start of the first that is; how many are."""
    if len(body) <= max_line + 1:
        return body, None, 0
    lines = body.splitlines(keepends=True) if b"\r" not in body else [p + b"\n" for p in body.split(b"\n")[:-1]]
    long = [line for line in lines if len(line) > max_line + 1]
    if not long:
        return body, None, 0
    return (
        b"".join(line for line in lines if len(line) <= max_line + 1),
        long[0].removesuffix(b"\n")[:SAMPLE_BYTES],
        len(long),
    )
