"""Bare lines over TCP and socket files: whole lines as they come, bounded, cut when a sender misbehaves."""

from __future__ import annotations

import os
import random
import socket
import stat
from collections.abc import Iterator
from pathlib import Path

import pytest

from monitor.errors import SourceError
from monitor.sources.sockets import CLIENTS, LINE_SECONDS
from tests.sources.wire import Wire


@pytest.fixture(params=["tcp", "unix"])
def wire(request: pytest.FixtureRequest, tmp_path: Path) -> Iterator[Wire]:
    wire = Wire(http=False, path=tmp_path / "lines.sock" if request.param == "unix" else None, max_line=1000)
    yield wire
    wire.close()


def test_lines_come_when_they_are_whole_and_each_sender_has_its_own_header(wire: Wire) -> None:
    a, b = wire.connect(), wire.connect()
    a.sendall(b"units,dock\r\n1,nor")
    wire.until(lambda: wire.polled)
    b.sendall(b"dock,units\nsouth,2\n")
    wire.until(lambda: b"south" in wire.data())
    a.sendall(b"th\n3,east\n")
    wire.until(lambda: b"east" in wire.data())
    assert [(x.data, x.first, x.header) for x in wire.polled] == [
        (b"units,dock\r\n", True, b"units,dock"),
        (b"dock,units\nsouth,2\n", True, b"dock,units"),
        (b"1,north\n3,east\n", False, b"units,dock"),
    ]
    assert [x.offset for x in wire.polled] == [0, 12, 31]
    (status,) = wire.source.chains()
    assert (status.name, status.position) == (wire.feed.address, 46)


def test_many_senders_lose_no_whole_line(wire: Wire) -> None:
    rng = random.Random(3)
    sent = []
    senders = [wire.connect() for _ in range(10)]
    for number, sender in enumerate(senders):
        text = b"".join(b"%d-%d %b\n" % (number, i, b"x" * rng.randrange(200)) for i in range(50))
        sent += text.splitlines()
        while text:
            size = rng.randrange(1, 400)
            sender.sendall(text[:size])
            text = text[size:]
            wire.poll()
        sender.close()
    wire.until(lambda: len(wire.data().splitlines()) == 500)
    assert sorted(wire.data().splitlines()) == sorted(sent)
    assert not wire.rejected()


def test_half_a_line_at_the_end_is_rejected_not_counted(wire: Wire) -> None:
    sender = wire.connect()
    sender.sendall(b"1\n12345")
    sender.close()
    wire.until(wire.rejected)
    assert wire.data() == b"1\n"
    assert wire.rejected() == {"line not ended by its sender": 1}
    assert [line.text for block in wire.polled for line in block.rejected] == [b"12345"]


def test_a_line_without_end_is_cut_and_counted(wire: Wire) -> None:
    sender, other = wire.connect(), wire.connect()
    sender.sendall(b"1\n" + b"x" * 1500 + b"\n2\n" + b"y" * 3000)
    wire.until(lambda: wire.rejected() == {"over-long line": 2})
    assert wire.data() == b"1\n2\n"
    assert "longer than 1000 bytes" in " ".join(wire.source.troubles())
    with pytest.raises(ConnectionError):  # the connection is gone
        send_for_ever(sender)
    other.sendall(b"3\n")
    wire.until(lambda: wire.data() == b"1\n2\n3\n")


def send_for_ever(sender: socket.socket) -> None:
    for _ in range(1000):
        sender.sendall(b"z" * 1000)


def test_an_unended_line_has_a_deadline_and_a_quiet_sender_has_none(wire: Wire) -> None:
    slow, quiet = wire.connect(), wire.connect()
    slow.sendall(b"12")
    quiet.sendall(b"1\n")
    wire.until(lambda: wire.data() == b"1\n")
    for _ in range(20):
        wire.poll()
    wire.moments.seconds += LINE_SECONDS + 1
    wire.poll()
    assert wire.rejected() == {"line not ended by its sender": 1}
    assert slow.recv(1) == b""
    quiet.sendall(b"2\n")
    wire.until(lambda: wire.data() == b"1\n2\n")


def test_senders_beyond_the_limit_are_turned_away(wire: Wire) -> None:
    for _ in range(CLIENTS):
        wire.connect()
        wire.poll()
    extra = wire.connect()
    wire.until(lambda: "turned away" in " ".join(wire.source.troubles()))
    assert extra.recv(1) == b""


def test_a_poll_takes_about_its_limit_and_finish_the_rest(wire: Wire) -> None:
    senders = [wire.connect() for _ in range(4)]
    for sender in senders:
        sender.sendall(b"1\n" * 1000)
    wire.until(lambda: wire.polled)
    assert len(wire.source.poll(10)) <= 1
    for _ in range(50):
        wire.polled += wire.source.finish()
    assert wire.source.finish() == []


def test_a_restart_goes_on_counting_bytes(wire: Wire) -> None:
    wire.connect().sendall(b"1\n2\n")
    wire.until(lambda: wire.polled)
    wire.commit()
    wire.crash()
    wire.connect().sendall(b"3\n")
    wire.until(lambda: wire.polled)
    assert wire.polled[0].offset == 4


def test_the_socket_file_is_for_its_owner_and_goes_with_the_source(tmp_path: Path) -> None:
    path = tmp_path / "lines.sock"
    wire = Wire(http=False, path=path)
    assert stat.S_IMODE(path.stat().st_mode) == 0o600
    with pytest.raises(SourceError, match="another process listens there"):
        Wire(http=False, path=path)
    assert path.exists()
    wire.close()
    assert not path.exists()


def test_only_a_stale_socket_file_is_replaced(tmp_path: Path) -> None:
    path = tmp_path / "lines.sock"
    with socket.socket(socket.AF_UNIX) as dead:
        dead.bind(str(path))
    Wire(http=False, path=path).close()
    path.write_text("precious")
    with pytest.raises(SourceError, match="something else than a socket"):
        Wire(http=False, path=path)
    assert path.read_text() == "precious"
    os.remove(path)
    path.symlink_to(tmp_path / "elsewhere")
    with pytest.raises(SourceError, match="something else than a socket"):
        Wire(http=False, path=path)
    with pytest.raises(SourceError, match="cannot listen there"):
        Wire(http=False, path=tmp_path / "no" / "such.sock")
