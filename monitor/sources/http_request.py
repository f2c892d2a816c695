"""One HTTP/1.1 request out of bytes that come in pieces (RFC 9110, RFC 9112). Pure; strict; bounded.

Strict where leniency has been abused: lines end in CRLF, no folded headers, not both a length and chunks, no
length twice. Everything that is refused has a status and a sentence.
"""

from __future__ import annotations

import re

import msgspec

_TOKEN = rb"[!#$%&'*+\-.^_`|~0-9A-Za-z]+"
_REQUEST_LINE = re.compile(rb"(" + _TOKEN + rb") ([\x21-\x7e]+) HTTP/([0-9])\.([0-9])")
_NAME = re.compile(_TOKEN)
_VALUE = re.compile(rb"[\t\x20-\x7e\x80-\xff]*")
_CHUNK = re.compile(rb"([0-9A-Fa-f]{1,8})[ \t]*(?:;[ \t\x21-\x7e\x80-\xff]*)?")
_MOST_HEADERS = 100
_LONGEST_CHUNK_LINE = 256
_END = b"\r\n"


class Refusal(Exception):  # noqa: N818 - an answer, not a fault of ours
    """The request is refused: HTTP status, and a sentence for the sender."""

    def __init__(self, status: int, sentence: str) -> None:
        super().__init__(sentence)
        self.status, self.sentence = status, sentence


class Head(msgspec.Struct, frozen=True, kw_only=True):
    """The head of a request. Header names are in lower case; a name that came twice has its values joined by ", "."""

    method: str
    target: str
    headers: dict[str, str]
    length: int | None
    chunked: bool
    keep_alive: bool
    expects_continue: bool


def parse_head(raw: bytes) -> Head:
    """The head without its final empty line. Raises Refusal."""
    first, *others = raw.split(_END)
    match = _REQUEST_LINE.fullmatch(first)
    if match is None:
        raise Refusal(400, "The first line is no HTTP request line.")
    if match[3] != b"1":
        raise Refusal(505, "Only HTTP/1.1 and HTTP/1.0 are spoken here.")
    headers = _headers(others)
    modern = match[4] != b"0"
    if modern and ("host" not in headers or ", " in headers["host"]):
        raise Refusal(400, "HTTP/1.1 needs one Host header.")
    length, chunked = _framing(headers, modern=modern)
    connection = {part.strip().lower() for part in headers.get("connection", "").split(",")}
    return Head(
        method=match[1].decode(), target=match[2].decode(), headers=headers, length=length, chunked=chunked,
        keep_alive="close" not in connection if modern else "keep-alive" in connection,
        expects_continue=modern and headers.get("expect", "").lower() == "100-continue",
    )  # fmt: skip


def _headers(lines: list[bytes]) -> dict[str, str]:
    if len(lines) > _MOST_HEADERS:
        raise Refusal(431, f"More than {_MOST_HEADERS} header lines.")
    headers: dict[str, str] = {}
    for line in lines:
        raw_name, colon, raw_value = line.partition(b":")
        if not colon or not _NAME.fullmatch(raw_name) or not _VALUE.fullmatch(raw_value):
            raise Refusal(400, "A header line is not of the form Name: value.")
        name, value = raw_name.decode().lower(), raw_value.strip(b" \t").decode("latin-1")
        headers[name] = f"{headers[name]}, {value}" if name in headers else value
    return headers


def _framing(headers: dict[str, str], *, modern: bool) -> tuple[int | None, bool]:
    """Content length, or whether chunks follow; (None, False) when there is no body."""
    length, coding = headers.get("content-length"), headers.get("transfer-encoding")
    if coding is not None:
        if length is not None or not modern:
            raise Refusal(400, "Transfer-Encoding cannot stand beside Content-Length, nor in HTTP/1.0.")
        if coding.lower() != "chunked":
            raise Refusal(501, "The only Transfer-Encoding understood is chunked.")
        return None, True
    if length is None:
        return None, False
    if not re.fullmatch(r"[0-9]{1,18}", length):
        raise Refusal(400, "Content-Length is not one whole number.")
    return int(length), False


class RequestReader:
    """Reads one request; `feed` it what comes. Holds at most the limits and what was fed at once.

    head      as soon as it is known
    complete  the whole request is there
    rest      bytes beyond it: the beginning of the next request
    """

    def __init__(self, *, head_limit: int, body_limit: int) -> None:
        self.head: Head | None = None
        self.complete = False
        self._head_limit, self._body_limit = head_limit, body_limit
        self._buffer = bytearray()
        self._body = bytearray()
        self._left: int | None = None  # of the body or chunk at hand
        self._trailer = 0
        self._in_trailer = False

    @property
    def started(self) -> bool:
        """Some byte of the request has come."""
        return bool(self._buffer) or self.head is not None

    @property
    def held(self) -> int:
        """Bytes held now."""
        return len(self._buffer) + len(self._body)

    @property
    def rest(self) -> bytes:
        """What came behind the complete request."""
        return bytes(self._buffer)

    def body(self) -> bytes:
        """The body of the complete request."""
        return bytes(self._body)

    def feed(self, data: bytes) -> None:
        """Take more bytes. Stops behind the head once, so that it can be judged before its body. Raises Refusal."""
        self._buffer += data
        if self.head is None:
            self._read_head()
        else:
            self.go_on()

    def go_on(self) -> None:
        """Read on behind the head, as far as the bytes go. Raises Refusal."""
        assert self.head is not None
        if self.head.chunked:
            while not self.complete and self._read_chunk():
                pass
        elif not self.complete:
            self._take(self.head.length or 0)
            self.complete = len(self._body) == (self.head.length or 0)

    def _read_head(self) -> None:
        while self._buffer.startswith(_END):  # an empty line before a request is passed over
            del self._buffer[:2]
        end = self._buffer.find(b"\r\n\r\n", 0, self._head_limit + 4)
        known = self._buffer[: end if end >= 0 else self._head_limit + 1]
        if known.count(b"\n") != known.count(_END):
            raise Refusal(400, "Lines of a request end in CR LF.")
        if end < 0:
            if len(self._buffer) > self._head_limit:
                raise Refusal(431, f"The head of the request is longer than {self._head_limit} bytes.")
            return
        self.head = parse_head(bytes(self._buffer[:end]))
        del self._buffer[: end + 4]
        if (self.head.length or 0) > self._body_limit:
            raise self._too_large()

    def _too_large(self) -> Refusal:
        return Refusal(413, f"A batch may have {self._body_limit} bytes at most; send the lines in several batches.")

    def _take(self, wanted: int) -> int:
        """Move bytes from the buffer to the body until it has `wanted`; how many were moved."""
        count = min(wanted - len(self._body), len(self._buffer))
        self._body += self._buffer[:count]
        del self._buffer[:count]
        return count

    def _read_chunk(self) -> bool:
        """One step of the chunked coding; False when more bytes are needed."""
        if self._in_trailer:
            return self._read_trailer()
        if self._left is None:
            return self._read_chunk_size()
        moved = self._take(len(self._body) + self._left)
        self._left -= moved
        if self._left:
            return False
        if len(self._buffer) < 2:
            return False
        if self._buffer[:2] != _END:
            raise Refusal(400, "A chunk does not end where its size says.")
        del self._buffer[:2]
        self._left = None
        return True

    def _read_chunk_size(self) -> bool:
        line = self._line(_LONGEST_CHUNK_LINE)
        if line is None:
            return False
        match = _CHUNK.fullmatch(line)
        if match is None:
            raise Refusal(400, "A chunk does not begin with its size.")
        size = int(match[1], 16)
        if len(self._body) + size > self._body_limit:
            raise self._too_large()
        if size:
            self._left = size
        else:
            self._in_trailer = True
        return True

    def _read_trailer(self) -> bool:
        """Headers behind the last chunk are passed over."""
        line = self._line(self._head_limit)
        if line is None:
            return False
        self._trailer += len(line)
        if self._trailer > self._head_limit:
            raise Refusal(431, "Too many headers behind the last chunk.")
        self.complete = not line
        return not self.complete

    def _line(self, limit: int) -> bytes | None:
        end = self._buffer.find(b"\n", 0, limit + 2)
        if end < 0:
            if len(self._buffer) > limit:
                raise Refusal(400, "A line of the chunked coding is too long.")
            return None
        if self._buffer[end - 1 : end] != b"\r":
            raise Refusal(400, "Lines of a request end in CR LF.")
        line = bytes(self._buffer[: end - 1])
        del self._buffer[: end + 1]
        return line
