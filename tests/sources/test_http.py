"""Batches over HTTP: acknowledged after the commit, counted once, refused with a status and a sentence."""

from __future__ import annotations

import contextlib
import http.client
import json
import random
import socket
import threading
from collections.abc import Iterator

import pytest

from monitor.errors import SourceError
from monitor.sources import http_lines
from monitor.sources.batches import KEPT, MOST_BATCHES, CountedBatches, taken_of
from monitor.sources.http_client import IDLE_SECONDS, REQUEST_SECONDS
from monitor.sources.http_lines import BODY, CLIENTS, HEAD, without_over_long
from tests.sources.wire import Wire, answer, request


@pytest.fixture
def wire() -> Iterator[Wire]:
    wire = Wire(http=True)
    yield wire
    wire.close()


def silent(sender: socket.socket) -> bool:
    """Nothing was answered."""
    sender.setblocking(False)
    try:
        return not sender.recv(1)
    except BlockingIOError:
        return True
    finally:
        sender.settimeout(10)


def post(wire: Wire, raw: bytes) -> tuple[int, str]:
    """Send one request on a connection of its own, commit what comes, and read the answer."""
    sender = wire.connect()
    sender.sendall(raw)
    for _ in range(200):
        wire.poll()
        wire.commit()
    return answer(sender)


def test_a_batch_is_acknowledged_after_the_commit_and_not_before(wire: Wire) -> None:
    sender = wire.connect()
    sender.sendall(request(b"1\n2\n"))
    wire.until(lambda: wire.polled)
    (block,) = wire.polled
    assert (block.chain, block.data, block.first, block.header) == (wire.feed.address, b"1\n2\n", True, b"1")
    for _ in range(20):
        wire.poll()
    assert silent(sender)
    assert wire.source.awaited()  # type: ignore[attr-defined]
    wire.commit()
    assert answer(sender) == (200, '{"lines":2,"repeated":false}\n')
    assert not wire.source.awaited()  # type: ignore[attr-defined]


def test_an_independent_client_library_is_understood_and_its_connection_kept(wire: Wire) -> None:
    """Python's own http.client as the outside reference; a second batch goes over the same connection."""
    answers = []

    def send() -> None:
        client = http.client.HTTPConnection("127.0.0.1", wire.port, timeout=10)
        for i, body in enumerate([b"1\n", iter([b"2\n3", b"\n4\n"])]):
            client.request("POST", "/lines", body, {"Idempotency-Key": f'"{i}"'}, encode_chunked=bool(i))
            answers.append(client.getresponse().read())
        client.close()

    thread = threading.Thread(target=send)
    thread.start()
    while thread.is_alive():
        wire.poll()
        wire.commit()
    assert [json.loads(text)["lines"] for text in answers] == [1, 3]
    assert wire.data() == b"1\n2\n3\n4\n"


def test_a_retried_batch_is_counted_once_whenever_the_answer_was_lost(wire: Wire) -> None:
    raw = request(b"1\n2\n", "x")
    first, second = wire.connect(), wire.connect()
    first.sendall(raw)
    wire.until(lambda: wire.polled)
    second.sendall(raw)  # retried before the commit: both are answered by it
    for _ in range(200):
        wire.poll()
    first.close()
    wire.commit()
    assert answer(second) == (200, '{"lines":2,"repeated":false}\n')
    assert post(wire, raw) == (200, '{"lines":2,"repeated":true}\n')
    wire.crash()
    assert post(wire, raw) == (200, '{"lines":2,"repeated":true}\n')
    assert wire.data() == b"1\n2\n"


def test_what_was_not_committed_before_a_crash_is_taken_again(wire: Wire) -> None:
    sender = wire.connect()
    sender.sendall(request(b"1\n", "x"))
    wire.until(lambda: wire.polled)
    wire.crash()
    assert answer(sender)[0] == 503
    assert post(wire, request(b"1\n", "x")) == (200, '{"lines":1,"repeated":false}\n')
    assert wire.data() == b"1\n"


def test_without_the_ids_in_the_bookmark_a_retry_would_be_counted_twice(wire: Wire) -> None:
    """The negative control: it is the committed ids that make a batch count once, not luck."""
    assert post(wire, request(b"1\n", "x"))[0] == 200
    wire.bookmark = None
    wire.crash()
    assert post(wire, request(b"1\n", "x")) == (200, '{"lines":1,"repeated":false}\n')
    assert wire.data() == b"1\n1\n"


def test_an_id_does_not_stand_for_other_lines(wire: Wire) -> None:
    assert post(wire, request(b"1\n", "x"))[0] == 200
    status, words = post(wire, request(b"2\n", "x"))
    assert (status, wire.data()) == (422, b"1\n")
    assert "a new batch needs a new id" in words


def test_random_crashes_and_retries_count_every_batch_once() -> None:
    """Senders retry until they are answered; commits, crashes and cut connections fall anywhere."""
    rng = random.Random(7)
    wire = Wire(http=True)
    batches = {f"b{i}": b"".join(b"%d-%d\n" % (i, j) for j in range(rng.randrange(5))) for i in range(120)}
    unanswered = dict(batches)
    while unanswered:
        key = rng.choice(list(unanswered))
        sender = wire.connect()
        sender.sendall(request(unanswered[key], key))
        for _ in range(rng.randrange(40)):
            wire.poll()
        step = rng.random()
        if step < 0.2:
            wire.crash()
        elif step < 0.7:
            wire.commit()
        if step < 0.5:  # the sender does not wait for the answer
            sender.close()
            continue
        sender.settimeout(0.02)
        try:
            if answer(sender)[0] == 200:
                del unanswered[key]
        except (TimeoutError, OSError):
            sender.close()
    wire.close()
    assert sorted(wire.data().split()) == sorted(b"".join(batches.values()).split())


@pytest.mark.parametrize(
    ("raw", "status", "words"),
    [
        (request(b"1\n", None), 400, "Idempotency-Key"),
        (request(b"1\n", "x" * 201), 400, "Idempotency-Key"),
        (request(b"1\n", head="GET /lines HTTP/1.1"), 405, "POST /lines"),
        (request(b"1\n", head="POST /other HTTP/1.1"), 404, "/lines"),
        (request(b"1\n", head="POST /lines HTTP/2.0"), 505, "HTTP/1.1"),
        (request(b"1\n", head="hello"), 400, "request line"),
        (request(b"1\n", extra="Origin: http://a.example\r\n"), 403, "browser"),
        (request(b"1\n", extra="Content-Encoding: gzip\r\n"), 415, "uncompressed"),
        (request(b"1\n", extra="Content-Length: 2\r\n"), 400, "Content-Length"),
        (request(b"1\n", extra="Transfer-Encoding: chunked\r\n"), 400, "Transfer-Encoding"),
        (request(b"1\n", extra="a b: c\r\n"), 400, "Name: value"),
        (request(b"1\n", extra="a: \x01\r\n"), 400, "Name: value"),
        (request(b"1\n", extra="a: " + "b" * HEAD + "\r\n"), 431, "longer than"),
        (request(b"1\n", extra="a: b\r\n" * 200), 431, "header lines"),
        (request(b"1\n").replace(b"Host: x\r\n", b""), 400, "Host"),
        (request(b"1\n").replace(b"\r\n", b"\n"), 400, "CR LF"),
        (request(b"").replace(b"Content-Length: 0\r\n", b""), 411, "how long"),
        (request(b"").replace(b": 0", b": 9" + b"9" * 12), 413, str(BODY)),
        (request(b"").replace(b": 0", b": -1"), 400, "whole number"),
        (request(b"zz\r\n").replace(b"Content-Length: 4", b"Transfer-Encoding: chunked"), 400, "its size"),
        (request(b"FFFFFFFF\r\n").replace(b"Content-Length: 10", b"Transfer-Encoding: chunked"), 413, str(BODY)),
        (request(b"1\r\naXX0\r\n\r\n").replace(b"Content-Length: 11", b"Transfer-Encoding: chunked"), 400, "size says"),
    ],
)  # fmt: skip
def test_what_is_wrong_is_refused_with_a_sentence_and_nothing_is_counted(
    wire: Wire, raw: bytes, status: int, words: str
) -> None:
    got, text = post(wire, raw)
    assert got == status
    assert words in text
    assert wire.data() == b""
    assert post(wire, request(b"1\n"))[0] == 200  # others are not troubled


def test_a_slow_request_is_ended_and_a_quiet_connection_closed(wire: Wire) -> None:
    slow, quiet = wire.connect(), wire.connect()
    slow.sendall(request(b"1\n")[:20])
    for _ in range(100):
        wire.poll()
    wire.moments.seconds += REQUEST_SECONDS + 1
    wire.poll()
    assert answer(slow)[0] == 408
    assert silent(quiet)
    wire.moments.seconds += IDLE_SECONDS
    wire.poll()
    assert quiet.recv(1) == b""


def test_senders_beyond_the_limit_are_turned_away_but_idle_ones_make_room(wire: Wire) -> None:
    busy = [wire.connect() for _ in range(CLIENTS)]
    for sender in busy[1:]:
        sender.sendall(b"POST ")
    for _ in range(100):
        wire.poll()
    assert post(wire, request(b"1\n", "a"))[0] == 200  # in place of the idle one
    wire.senders[-1].sendall(b"POST ")
    wire.poll()
    status, words = post(wire, request(b"1\n", "b"))
    assert status == 503
    assert "senders at once" in words
    assert "turned away" in " ".join(wire.source.troubles())


def test_memory_for_waiting_batches_is_bounded(wire: Wire, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(http_lines, "HELD", 1000)
    waiting = [wire.connect() for _ in range(3)]
    for i, sender in enumerate(waiting):
        sender.sendall(request(b"x" * 400 + b"\n", f"b{i}"))
        for _ in range(100):
            wire.poll()
    assert answer(waiting[2])[0] == 429
    wire.commit()
    assert [answer(sender)[0] for sender in waiting[:2]] == [200, 200]
    assert post(wire, request(b"x" * 400 + b"\n", "b2"))[0] == 200


def test_the_number_of_waiting_batches_is_bounded(wire: Wire, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(http_lines, "BATCHES", 3)
    for i in range(4):
        sender = wire.connect()
        sender.sendall(request(b"1\n", f"b{i}"))
        for _ in range(100):
            wire.poll()
        sender.shutdown(socket.SHUT_WR)  # whether the sender still cares makes no difference
    assert answer(wire.senders[-1])[0] == 429
    wire.commit()
    assert len(wire.committed) == 3


def test_pipelined_requests_are_answered_in_turn(wire: Wire) -> None:
    sender = wire.connect()
    sender.sendall(b"".join(request(b"%d\n" % i, f"k{i % 50}") for i in range(50)) * 40)
    counted = []
    for _ in range(50):
        wire.until(lambda: wire.polled)
        wire.commit()
        counted.append(answer(sender))
    assert wire.data() == b"".join(b"%d\n" % i for i in range(50))
    got = b""
    sender.setblocking(False)
    while got.count(b'"repeated":true') < 1950:
        wire.poll()
        with contextlib.suppress(BlockingIOError):
            got += sender.recv(1 << 16)
    assert wire.data().count(b"\n") == 50


def test_a_sender_that_does_not_read_its_answers_is_not_listened_to(wire: Wire) -> None:
    post(wire, request(b"1\n", "x"))
    sender = wire.connect()
    sender.setsockopt(socket.SOL_SOCKET, socket.SO_RCVBUF, 4096)
    sender.setblocking(False)
    wire.poll()
    clients = wire.source._clients  # type: ignore[attr-defined]
    for connection in clients:
        connection.setsockopt(socket.SOL_SOCKET, socket.SO_SNDBUF, 4096)
    for _ in range(3000):
        with contextlib.suppress(BlockingIOError):
            sender.send(request(b"1\n", "x") * 500)
        wire.poll()
    (client,) = [client for client in clients.values() if client.blocked]
    assert len(client._out) < 4096
    wire.moments.seconds += REQUEST_SECONDS + 1
    wire.poll()
    assert client not in clients.values()


def test_an_expected_continue_is_given(wire: Wire) -> None:
    sender = wire.connect()
    head, _, body = request(b"1\n", extra="Expect: 100-continue\r\n").partition(b"\r\n\r\n")
    sender.sendall(head + b"\r\n\r\n")
    for _ in range(100):
        wire.poll()
    assert sender.recv(100) == b"HTTP/1.1 100 Continue\r\n\r\n"
    sender.sendall(body)
    wire.until(lambda: wire.polled)
    wire.commit()
    assert answer(sender)[0] == 200


def test_a_line_without_newline_at_the_end_is_whole_and_over_long_ones_are_counted() -> None:
    wire = Wire(http=True, max_line=10)
    assert post(wire, request(b"1\n" + b"x" * 11 + b"\n" + b"y" * 10 + b"\r\n\n2"))[0] == 200
    assert wire.data() == b"1\n\n2\n"
    assert wire.rejected() == {"over-long line": 2}
    wire.close()
    assert without_over_long(b"a\rb\x0bc\n" * 9 + b"d" * 12 + b"\n", 10) == (b"a\rb\x0bc\n" * 9, b"d" * 12, 1)


def test_ids_are_remembered_within_bounds_and_through_bookmarks() -> None:
    batches = CountedBatches(None, "c")
    second = 1_000_000_000
    for i in range(MOST_BATCHES + 10):
        batches.count(f"id{i}", b"1\n", i)
    bookmark = batches.count("last", b"22\n", second)
    assert len(batches) == MOST_BATCHES
    assert len(bookmark) < 25 * MOST_BATCHES
    again = CountedBatches(bookmark, "c")
    assert (
        (again.taken, again.position)
        == (MOST_BATCHES + 11, 2 * (MOST_BATCHES + 10) + 3)
        == (taken_of(bookmark), again.position)
    )
    assert again.knows("last", b"22\n") is True
    assert again.knows("last", b"23\n") is None
    assert again.knows("id5", b"1\n") is False
    assert again.knows("id5000", b"1\n") is True
    again.count("much later", b"", (KEPT + 10) * second)
    assert len(again) == 1
    assert again.knows("last", b"22\n") is False
    with pytest.raises(SourceError, match="cannot be read"):
        CountedBatches("{", "c")


def test_an_address_in_use_is_told(wire: Wire) -> None:
    other = Wire.__new__(Wire)
    other.feed, other.bookmark, other.moments = wire.feed, None, wire.moments
    with pytest.raises(SourceError, match="another process listens there"):
        other._open()
