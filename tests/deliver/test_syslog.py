"""Syslog: messages by the grammar of RFC 5424, and real receivers of every transport."""

from __future__ import annotations

import re
import socket
import time
from pathlib import Path

import msgspec
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.deliver.cloudevent import cloud_event
from monitor.deliver.route import Receipt
from monitor.deliver.syslog import MOST_BYTES, Sender, SyslogRoute, syslog_message
from monitor.plan.receivers import SyslogWay
from tests.deliver.ways import event, receipt

SENDER = Sender(host="watch.example.com", process=4711, facility=3)

# RFC 5424 section 6, ABNF, as a regular expression.
GRAMMAR = re.compile(
    rb"<(?P<pri>0|[1-9][0-9]{0,2})>1 "
    rb"(?P<time>[0-9]{4}-[0-9]{2}-[0-9]{2}T[0-9]{2}:[0-9]{2}:[0-9]{2}(?:\.[0-9]{1,6})?(?:Z|[+-][0-9]{2}:[0-9]{2})) "
    rb"(?P<host>[!-~]{1,255}) (?P<app>[!-~]{1,48}) (?P<process>[!-~]{1,128}) (?P<kind>[!-~]{1,32}) "
    rb'(?P<data>(?:\[[!#-<>-\\^-~]{1,32}(?: [!#-<>-\\^-~]{1,32}="(?:[^"\\\]]|\\.)*")*\])+) '
    rb"\xef\xbb\xbf(?P<text>.*)",
    flags=re.DOTALL,
)


def parsed(message: bytes) -> re.Match[bytes]:
    found = GRAMMAR.fullmatch(message)
    assert found is not None, message
    return found


def test_a_raised_alarm_follows_the_grammar() -> None:
    found = parsed(syslog_message(event(), SENDER))
    assert found["pri"] == b"28"  # system daemon 3 * 8 + warning 4: RFC 5424 section 6.2.1
    assert found["time"] == b"2026-12-01T14:05:00.123456Z"
    assert (found["host"], found["app"], found["process"]) == (b"watch.example.com", b"tailgauge", b"4711")
    assert found["kind"] == b"raised"
    assert found["data"] == (
        b'[tailgauge@32473 id="0123456789abcdef" alarm="a1b2" stream="north-dock" rule="exponent"'
        b' state="unacknowledged" priority="medium"]'
    )
    assert found["text"].decode() == "north-dock: tail heavier."


@pytest.mark.parametrize(
    ("kind", "priority", "severity"),
    [("raised", "high", 2), ("raised again", "low", 5), ("reminder", "medium", 4), ("closed", "high", 6)],
)
def test_severity_follows_priority_while_something_stands(kind: str, priority: str, severity: int) -> None:
    made = cloud_event(
        notice="1", kind=kind, source="/s", stream="x", time="2026-12-01T14:05:00Z",
        data={"text": "t", "alarm": {"priority": priority}},
    )  # fmt: skip
    sender = msgspec.structs.replace(SENDER, facility=16)
    assert int(parsed(syslog_message(made, sender))["pri"]) == 16 * 8 + severity


def test_values_are_escaped_and_lines_cannot_be_forged() -> None:
    made = msgspec.structs.replace(event(), subject='a"b\\c]d\n<34>1 forged')
    message = syslog_message(made, SENDER)
    assert b"\n" not in message
    assert rb'stream="a\"b\\c\]d <34>1 forged"' in parsed(message)["data"]
    forged = syslog_message(event(text="x\r\n<34>1 forged\x1b[2J"), SENDER)
    assert not re.search(rb"[\x00-\x1f]", forged)


@settings(max_examples=200, deadline=None, derandomize=True)
@given(stream=st.text(max_size=400), text=st.text(max_size=3000), host=st.text(max_size=300))
def test_any_name_and_text_stay_within_grammar_and_size(stream: str, text: str, host: str) -> None:
    data = {"text": text, "alarm": {"rule": stream, "state": text, "priority": host}}
    made = cloud_event(notice="1", kind="raised", source="/s", stream=stream, time="2026-12-01T14:05:00Z", data=data)
    message = syslog_message(made, Sender(host=host, process=1, facility=23))
    parsed(message)
    assert len(message) <= MOST_BYTES
    message.decode("utf-8")


def test_a_long_sentence_is_cut_between_characters() -> None:
    message = syslog_message(event(text="\u20ac" * 2000), SENDER)
    assert MOST_BYTES - 3 <= len(message) <= MOST_BYTES
    assert message.decode().endswith("\u20ac..")


def test_a_long_name_leaves_room_for_the_sentence() -> None:
    message = syslog_message(msgspec.structs.replace(event(), subject="]" * 5000), SENDER)
    assert len(message) <= MOST_BYTES
    assert parsed(message)["text"].decode() == "north-dock: tail heavier."


def send(way: SyslogWay, timeout: float = 10.0) -> Receipt:
    route = SyslogRoute(way, host="watch", process=7, timeout=timeout)
    return receipt(route.send(event(), time.monotonic()))


EXPECTED = syslog_message(event(), Sender(host="watch", process=7, facility=3))


def test_over_udp_each_message_is_one_datagram() -> None:
    with socket.socket(socket.AF_INET, socket.SOCK_DGRAM) as receiver:
        receiver.bind(("127.0.0.1", 0))
        receiver.settimeout(10)
        found = send(SyslogWay(transport="udp", host="127.0.0.1", port=receiver.getsockname()[1], facility=3))
        assert found == Receipt(result="delivered", detail="sent; datagrams give no answer")
        assert receiver.recv(65536) == EXPECTED


def test_over_tcp_octets_are_counted() -> None:
    with socket.create_server(("127.0.0.1", 0)) as listener:
        listener.settimeout(10)
        route = SyslogRoute(
            SyslogWay(transport="tcp", host="127.0.0.1", port=listener.getsockname()[1], facility=3),
            host="watch", process=7, timeout=10.0,
        )  # fmt: skip
        sending = route.send(event(), time.monotonic())
        stream, _ = listener.accept()
        with stream:
            stream.settimeout(10)
            got = b"".join(iter(lambda: stream.recv(65536), b""))
        assert receipt(sending).delivered
    # RFC 6587 section 3.4.1: MSG-LEN SP SYSLOG-MSG.
    length, _, message = got.partition(b" ")
    assert int(length) == len(message)
    assert message == EXPECTED


def test_to_a_local_socket_of_datagrams_or_a_stream(tmp_path: Path) -> None:
    path = str(tmp_path / "log")
    with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as receiver:
        receiver.bind(path)
        receiver.settimeout(10)
        assert send(SyslogWay(transport="unix", host=path, port=0, facility=3)).detail == "sent to the local socket"
        assert receiver.recv(65536) == EXPECTED
    path = str(tmp_path / "log2")
    with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as listener:
        listener.bind(path)
        listener.listen()
        listener.settimeout(10)
        assert send(SyslogWay(transport="unix", host=path, port=0, facility=3)).delivered
        stream, _ = listener.accept()
        with stream:
            assert stream.recv(65536) == b"%d %b" % (len(EXPECTED), EXPECTED)


def test_what_can_be_known_of_failures_is_told(tmp_path: Path) -> None:
    with socket.create_server(("127.0.0.1", 0)) as listener:
        port = listener.getsockname()[1]
    tcp = send(SyslogWay(transport="tcp", host="127.0.0.1", port=port, facility=3))
    assert tcp.detail == f"tcp 127.0.0.1:{port}: Connection refused"
    udp = send(SyslogWay(transport="udp", host="127.0.0.1", port=port, facility=3))
    assert udp.detail == f"udp 127.0.0.1:{port}: Connection refused"
    absent = send(SyslogWay(transport="unix", host=str(tmp_path / "absent"), port=0, facility=3))
    assert absent.detail.endswith("absent: No such file or directory")
    unknown = send(SyslogWay(transport="udp", host="nowhere.invalid", port=514, facility=3))
    assert "name cannot be looked up" in unknown.detail
