"""The bytes of one file by position, plain or compressed, and whether they are those of a mark."""

from __future__ import annotations

import errno
import gzip
import os
import stat
import zlib
from typing import BinaryIO, cast

from monitor.sources.marks import ANCHOR_BYTES, HEAD_BYTES, Mark, anchor_of, head_of

UNREADABLE_PACKING = (".zst", ".xz", ".bz2", ".lz4", ".zip", ".Z", ".7z")
_STRIDE = 1 << 20


class Incomplete(Exception):  # noqa: N818 - a state of the file, not a fault of ours
    """A compressed file ends before its content does, or is damaged."""


class NotAFile(OSError):  # noqa: N818
    """Something else than a regular file stands at the path."""


class PlainContent:
    """An open plain file."""

    packed = False

    def __init__(self, path: str) -> None:
        """Open a path. Raises OSError, NotAFile."""
        # Without O_NONBLOCK opening a named pipe would wait for its writer.
        self._fd = os.open(path, os.O_RDONLY | os.O_NONBLOCK | os.O_CLOEXEC)
        self.path = os.path.realpath(path)
        status = os.fstat(self._fd)
        if not stat.S_ISREG(status.st_mode):
            os.close(self._fd)
            raise NotAFile(errno.EINVAL, "not a regular file", path)
        self.inode = (status.st_dev, status.st_ino)

    def read_at(self, position: int, count: int) -> bytes:
        """Up to count bytes from a position; fewer only at the end."""
        data = os.pread(self._fd, count, position)
        while data and len(data) < count:
            more = os.pread(self._fd, count - len(data), position + len(data))
            if not more:
                break
            data += more
        return data

    def next_data(self, position: int) -> int:
        """The next position that is not in a hole of a sparse file."""
        try:
            return os.lseek(self._fd, position, os.SEEK_DATA)
        except OSError:  # no data any more, or a file system that does not tell
            return position

    def size(self) -> int:
        """Bytes now."""
        return os.fstat(self._fd).st_size

    def modified(self) -> int:
        """When it was last written, ns since 1970 UTC."""
        return os.fstat(self._fd).st_mtime_ns

    def links(self) -> int:
        """Names that the file still has."""
        return os.fstat(self._fd).st_nlink

    def close(self) -> None:
        """Give the file back."""
        os.close(self._fd)


class PackedContent:
    """An open gzip file, read forwards; going back means reading from the start again."""

    packed = True

    def __init__(self, path: str) -> None:
        """Open a path. Raises OSError, NotAFile."""
        self._raw = PlainContent(path)
        self.path, self.inode = self._raw.path, self._raw.inode
        self._stream: gzip.GzipFile | None = None
        self._at = 0
        self._broken_at: tuple[int, int] | None = None

    def read_at(self, position: int, count: int) -> bytes:
        """Up to count bytes of content from a position; fewer only at the end. Raises Incomplete."""
        if self._broken_at == self._version():
            raise Incomplete
        try:
            if self._stream is None or position < self._at:
                self._rewind()
            while self._at < position:
                if not self._read(min(_STRIDE, position - self._at)):
                    return b""
            return self._read(count)
        except (EOFError, zlib.error, gzip.BadGzipFile):
            self._broken_at, self._stream = self._version(), None
            raise Incomplete from None

    def _read(self, count: int) -> bytes:
        if self._stream is None:
            return b""
        data = self._stream.read(count)
        self._at += len(data)
        return data

    def _rewind(self) -> None:
        self._stream = gzip.GzipFile(fileobj=cast(BinaryIO, _Positioned(self._raw)), mode="rb")
        self._at = 0

    def _version(self) -> tuple[int, int]:
        status = os.fstat(self._raw._fd)
        return status.st_size, status.st_mtime_ns

    def next_data(self, position: int) -> int:
        """Compressed files have no holes."""
        return position

    def size(self) -> int:
        """Content bytes as far as read; the end is known only when it is reached."""
        return self._at

    def modified(self) -> int:
        """When it was last written, ns since 1970 UTC."""
        return self._raw.modified()

    def links(self) -> int:
        """Names that the file still has."""
        return self._raw.links()

    def close(self) -> None:
        """Give the file back."""
        self._stream = None
        self._raw.close()


Content = PlainContent | PackedContent


class _Positioned:
    """A plain content as the readable object that gzip wants."""

    def __init__(self, raw: PlainContent) -> None:
        self._raw, self._at = raw, 0

    def read(self, count: int = -1) -> bytes:
        data = self._raw.read_at(self._at, count if count >= 0 else _STRIDE)
        self._at += len(data)
        return data

    def seek(self, position: int, whence: int = 0) -> int:
        self._at = position if whence == 0 else self._at + position
        return self._at

    def tell(self) -> int:
        return self._at

    def seekable(self) -> bool:
        return True


def open_content(path: str) -> Content:
    """Open a file; one called .gz is read as its content. Raises OSError, NotAFile."""
    return PackedContent(path) if path.endswith(".gz") else PlainContent(path)


def same_content(content: Content, mark: Mark) -> bool:
    """Whether the content begins as the marked one did, up to the marked position. Raises Incomplete."""
    if mark.position == 0:  # nothing to compare: only an empty file of the same inode is the same
        return content.inode == (mark.device, mark.inode) and not content.read_at(0, 1)
    if not content.packed and content.size() < mark.position:
        return False
    if head_of(content.read_at(0, min(HEAD_BYTES, mark.position)), mark.position) != mark.head:
        return False
    return anchor_of(before(content, mark.position)) == mark.anchor


def before(content: Content, position: int) -> bytes:
    """The last ANCHOR_BYTES before a position."""
    start = max(0, position - ANCHOR_BYTES)
    return content.read_at(start, position - start)
