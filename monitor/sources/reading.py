"""One file being read: position, what stands before it, and the check that it still does."""

from __future__ import annotations

from monitor.sources.content import Content, PlainContent, before
from monitor.sources.cutting import Taken, take
from monitor.sources.marks import ANCHOR_BYTES, HEAD_BYTES, Mark, anchor_of, head_of

_HEADER_BYTES = 1 << 16
_FEWEST_BYTES = 1 << 12
_LAST_BYTES = 1 << 14


class Changed(Exception):  # noqa: N818 - a state of the file, not a fault of ours
    """What stands before the position is not what was read: the file was cut off and began anew."""


class Reading:
    """Reads one file from a position on.

    finite  the file cannot grow (compressed, or a copy): its end is final
    size    bytes as last seen
    """

    def __init__(self, content: Content, mark: Mark | None = None, *, finite: bool = False) -> None:
        """Start at a mark that the content is known to match, or at the beginning. Raises Incomplete."""
        self.content = content
        self.finite = finite or content.packed
        self.position = 0 if mark is None else mark.position
        self.skipping = mark is not None and mark.skipping
        self.size = content.size()
        self._start = content.read_at(0, min(HEAD_BYTES, self.position))
        self._header: bytes | None = None
        if content.packed or mark is not None:  # now: going back in a compressed file is dear
            self.header()
        self._tail = before(content, self.position)

    def mark(self) -> Mark:
        """The position as a mark."""
        device, inode = self.content.inode
        head, anchor = head_of(self._start, self.position), anchor_of(self._tail)
        return Mark(device, inode, self.content.path, head, self.position, anchor, self.skipping)

    def header(self) -> bytes:
        """The file's first line without its newline; its known part while it is not ended."""
        if self._header is None:
            start = self.content.read_at(0, _HEADER_BYTES)
            newline = start.find(b"\n")
            if newline < 0 and len(start) < _HEADER_BYTES:
                return start
            self._header = (start if newline < 0 else start[:newline]).removesuffix(b"\r")
        return self._header

    def known_header(self) -> bytes | None:
        """The first line as it was read, even if the file has been cut off since."""
        newline = self._start.find(b"\n")
        return self._header if newline < 0 else self._start[:newline].removesuffix(b"\r")

    def take(self, limit: int, *, max_line: int, final: bool = False) -> Taken | None:
        """The next whole lines, about `limit` bytes; None when there are none (yet).

        Raises Changed, content.Incomplete, OSError; the position has not moved then.
        """
        self._jump_hole()
        count = self._to_a_newline(max(limit, _FEWEST_BYTES))
        raw = self._read(count)
        taken = self._cut(raw, count, max_line, final)
        if not taken.consumed and len(raw) == count:
            count = max_line + 2
            raw = self._read(count)
            taken = self._cut(raw, count, max_line, final)
        if not taken.consumed:
            return None
        if len(self._start) < HEAD_BYTES:
            self._start = (self._start + raw[: taken.consumed])[:HEAD_BYTES]
        settled = raw[max(0, taken.consumed - ANCHOR_BYTES) : taken.consumed]
        self._tail = (self._tail + settled)[-ANCHOR_BYTES:]
        self.position += taken.consumed
        self.skipping = taken.skipping
        return taken

    def _to_a_newline(self, count: int) -> int:
        """Where a large read should end: behind a newline, so that its lines need not be copied out of it."""
        if count <= 2 * _LAST_BYTES or not isinstance(self.content, PlainContent):
            return count
        first = count - _LAST_BYTES
        newline = self.content.read_at(self.position + first, _LAST_BYTES).rfind(b"\n")
        return count if newline < 0 else first + newline + 1

    def _read(self, count: int) -> bytes:
        raw = self.content.read_at(self.position, count)
        # Checked after the read, so that bytes of a file that began anew in between are not taken.
        self._check()
        self.size = self.position + len(raw)
        if isinstance(self.content, PlainContent):
            self.size = max(self.size, self.content.size())
        return raw

    def _cut(self, raw: bytes, count: int, max_line: int, final: bool) -> Taken:
        if len(raw) == count and not raw.strip(b"\0") and not self.skipping:
            # Zeros as far as one can see: a hole if the file ends in something else.
            last = b"x" if self.content.packed or final else self.content.read_at(self.size - 1, 1)
            passed = len(raw) if last != b"\0" else 0
            return Taken(passed, 0, b"", None, passed, False)
        return take(raw, skipping=self.skipping, max_line=max_line, final=final and len(raw) < count)

    def _check(self) -> None:
        if isinstance(self.content, PlainContent) and before(self.content, self.position) != self._tail:
            raise Changed

    def _jump_hole(self) -> None:
        """A hole of a sparse file can be huge; its zeros need not be read."""
        if self.skipping or self.content.packed or self.content.read_at(self.position, 1) != b"\0":
            return
        there = self.content.next_data(self.position)
        if there > self.position:
            self._check()
            self._start = self.content.read_at(0, min(HEAD_BYTES, there))
            self._tail = before(self.content, there)
            self.position = there
