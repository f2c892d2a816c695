"""The reader of HTTP requests: any bytes, in any pieces, are read, waited for or refused; never more."""

from __future__ import annotations

import contextlib
import email.parser
import re
from itertools import pairwise

from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.sources.http_request import Refusal, RequestReader

HEAD, BODY = 400, 300


def read(pieces: list[bytes]) -> tuple[object, ...]:
    """What becomes of a request that comes in pieces: refused with a status, read, or not whole yet."""
    reader = RequestReader(head_limit=HEAD, body_limit=BODY)
    for piece in pieces:
        try:
            before = reader.head
            reader.feed(piece)
            if before is None and reader.head is not None:
                reader.go_on()
        except Refusal as refusal:
            return ("refused", refusal.status, refusal.sentence)
        assert reader.held <= HEAD + 4 + BODY + len(piece) + 300
        if reader.complete:
            return ("read", reader.head, reader.body())
    return ("waiting", reader.head)


def pieces_of(data: bytes, cuts: list[int]) -> list[bytes]:
    places = sorted({0, len(data), *(cut % (len(data) + 1) for cut in cuts)})
    return [data[a:b] for a, b in pairwise(places)]


TOKEN = st.text("abcXYZ09-_!", min_size=1, max_size=12)
VALUE = st.text("abc XYZ;,=/\t~", max_size=20).map(lambda text: text.strip(" \t"))
SIZES = st.lists(st.integers(1, 40), max_size=6)


@st.composite
def requests(draw: st.DrawFn) -> tuple[bytes, dict[str, str], bytes]:
    """A good request: its bytes, its headers, its body."""
    headers = {
        name.lower(): value
        for name, value in draw(st.dictionaries(TOKEN.map(lambda t: "x-" + t), VALUE, max_size=4)).items()
    }
    headers["host"] = "x"
    body = draw(st.binary(max_size=200))
    if draw(st.booleans()):
        headers["transfer-encoding"] = "chunked"
        sent, rest = b"", body
        for size in draw(SIZES):
            if rest:
                sent += b"%x;a=b\r\n%b\r\n" % (len(rest[:size]), rest[:size])
                rest = rest[size:]
        sent += (
            (b"%x\r\n%b\r\n" % (len(rest), rest) if rest else b"")
            + b"0\r\n"
            + draw(st.sampled_from([b"", b"a: b\r\n"]))
            + b"\r\n"
        )
    else:
        headers["content-length"] = str(len(body))
        sent = body
    head = "".join(f"{name}:{draw(st.sampled_from(['', ' ', '  ']))}{value}\r\n" for name, value in headers.items())
    return b"\r\n" * draw(st.integers(0, 2)) + f"POST /lines HTTP/1.1\r\n{head}\r\n".encode() + sent, headers, body


@settings(max_examples=300, deadline=None)
@given(requests(), st.lists(st.integers(0, 2000), max_size=12))
def test_a_good_request_is_read_whole_whatever_the_pieces(
    made: tuple[bytes, dict[str, str], bytes], cuts: list[int]
) -> None:
    raw, headers, body = made
    outcome = read(pieces_of(raw, cuts))
    if outcome[0] == "refused":
        assert outcome[1] == 431
        assert raw.lstrip(b"\r\n").find(b"\r\n\r\n") > HEAD
        return
    kind, head, got = outcome
    assert (kind, head.headers, got) == ("read", headers, body)  # type: ignore[attr-defined]
    # The library's own reader of header fields as a second opinion.
    text = raw.lstrip(b"\r\n").partition(b"\r\n\r\n")[0].partition(b"\r\n")[2].decode()
    twin = email.parser.HeaderParser().parsestr(text)
    assert {name.lower(): value.strip(" \t") for name, value in twin.items()} == headers


PARTS = st.sampled_from(
    [b"POST /lines HTTP/1.1\r\n", b"Host: x\r\n", b"Content-Length: 3\r\n", b"Transfer-Encoding: chunked\r\n", b"\r\n",
     b"3\r\nabc\r\n", b"0\r\n\r\n", b"ffffffff\r\n", b"\n", b"\r", b"\0", b":", b" ", b"Content-Length: 999\r\n",
     b"a" * 500]
)  # fmt: skip


@settings(max_examples=500, deadline=None)
@given(
    st.one_of(st.binary(max_size=600), st.lists(st.one_of(PARTS, st.binary(max_size=5)), max_size=14).map(b"".join)),
    st.lists(st.integers(0, 2000), max_size=12),
)
def test_any_bytes_in_any_pieces_come_to_the_same(raw: bytes, cuts: list[int]) -> None:
    whole, cut = read([raw]), read(pieces_of(raw, cuts))
    assert cut[0] == whole[0]
    if whole[0] == "read":
        assert cut == whole
    if whole[0] == "refused":
        assert whole[1] in (400, 413, 431, 501, 505)
        assert str(whole[2]).endswith(".")


@settings(max_examples=200, deadline=None)
@given(requests(), requests())
def test_what_follows_a_request_is_kept_for_the_next(
    first: tuple[bytes, dict[str, str], bytes], second: tuple[bytes, dict[str, str], bytes]
) -> None:
    reader = RequestReader(head_limit=10_000, body_limit=BODY)
    reader.feed(first[0] + second[0])
    reader.go_on()
    assert (reader.complete, reader.body(), reader.rest) == (True, first[2], second[0])


@settings(max_examples=100, deadline=None)
@given(requests(), st.integers(0, 10_000), st.integers(0, 255))
def test_a_spoilt_byte_never_breaks_the_reader(
    made: tuple[bytes, dict[str, str], bytes], place: int, byte: int
) -> None:
    raw = bytearray(made[0])
    raw[place % len(raw)] = byte
    with contextlib.suppress(Refusal):
        assert re.fullmatch("refused|read|waiting", str(read([bytes(raw)])[0]))
