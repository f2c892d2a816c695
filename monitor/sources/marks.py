"""Where reading stands in a file, told so that the same content is recognised under any name.

A file is known by its device and inode, by the digest of its first line, and by the checksum of the 256 bytes
before the position: names change in a rotation, inodes are used again, and first lines may be shared headers;
all four together have to agree for "the same file", the last two for "the same content" (a copy, a compressed
file). Known limit: a file cut off and grown again with identical bytes looks unchanged.
"""

from __future__ import annotations

import hashlib
import zlib

import msgspec

from monitor.errors import SourceError

HEAD_BYTES = 4096
ANCHOR_BYTES = 256
KEPT_FINISHED = 16
KEPT_EMPTY = 8
VERSION = 1


class Mark(msgspec.Struct, frozen=True, array_like=True):
    """A position in a file's content.

    device, inode  the file when it was last seen
    path           where that was, symbolic links resolved
    head           digest of the first line (of at most HEAD_BYTES, and of what was read)
    position       bytes read (uncompressed)
    anchor         CRC-32 of the ANCHOR_BYTES before the position
    skipping       the position is inside an over-long line
    """

    device: int
    inode: int
    path: str
    head: str
    position: int
    anchor: int
    skipping: bool = False


class Bookmark(msgspec.Struct, frozen=True, array_like=True):
    """A chain's place.

    current   the file being read; None: the next one is to be found
    finished  files read to the end, oldest first
    carried   first line that still names the columns, though the file being read lost it by being cut off
    coming    the same for the file that comes next
    """

    version: int
    current: Mark | None
    finished: tuple[Mark, ...]
    carried: bytes = b""
    coming: bytes = b""


def head_of(start: bytes, position: int) -> str:
    """Digest of the first line, given the first HEAD_BYTES of a file."""
    line = start[: min(HEAD_BYTES, position)]
    newline = line.find(b"\n")
    return hashlib.blake2b(line if newline < 0 else line[: newline + 1], digest_size=8).hexdigest()


def anchor_of(before: bytes) -> int:
    """Checksum of the bytes before a position."""
    return zlib.crc32(before[-ANCHOR_BYTES:])


def write_bookmark(bookmark: Bookmark) -> str:
    """A bookmark as text."""
    return msgspec.json.encode(bookmark).decode()


def read_bookmark(text: str, chain: str) -> Bookmark:
    """A bookmark from its text. Raises SourceError."""
    try:
        bookmark = msgspec.json.decode(text, type=Bookmark)
    except msgspec.DecodeError as error:
        raise SourceError(f"{chain}: the stored position cannot be read ({error})") from None
    if bookmark.version != VERSION:
        raise SourceError(f"{chain}: the stored position was written by a later version of the program")
    return bookmark
