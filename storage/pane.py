"""One time slice of a stream: every size with its count. Panes drop digits, never events.

While a pane has at most `distinct` different sizes they are kept exactly; beyond that they are rounded
onto the fixed grid (storage.grid), counts still exact. Whether a pane is on the grid, and what it holds,
depends only on its multiset of events: adding panes is associative and commutative, and the content never
depends on batching, restarts or on which process read which line. Everything that has to be exact after a
crash, or after a sum over machines, rests on this one property.
"""

from __future__ import annotations

import struct
import zlib
from collections.abc import Iterable
from dataclasses import dataclass
from hashlib import blake2b
from typing import TypeVar

import msgspec
import numpy as np
from numpy.typing import NDArray

from storage.errors import StoreCorrupt
from storage.grid import cell_of, edges

Key = TypeVar("Key", np.float64, np.int64)

LARGEST_KEPT = 32
"""Events kept by name beside the counts: people ask which orders these were."""

_MAGIC = b"TGP1"
_HEADER = struct.Struct("<4sBBBxIqqdd")  # magic, grid?, bytes a count, largest kept, entries, n, late, min, max
_EVENT = struct.Struct("<dq8s")  # size, time, digest of the line
_COUNT_TYPES = {1: "<u1", 2: "<u2", 4: "<u4", 8: "<i8"}


class LargeEvent(msgspec.Struct, frozen=True, array_like=True):
    """One of the largest events. Order: size descending, then time, then the digest of its line.

    time is the effective time in ns since 1970 UTC; digest is 8 bytes of BLAKE2b over the line, in hex;
    place is an annotation (feed, byte position) that takes no part in order, equality or digests.
    """

    size: float
    time: int
    digest: str
    place: str

    @property
    def rank(self) -> tuple[float, int, str]:
        """The key that orders large events."""
        return (-self.size, self.time, self.digest)


def rank_of(event: LargeEvent) -> tuple[float, int, str]:
    """The event's rank, where there are many to be sorted."""
    return (-event.size, event.time, event.digest)


@dataclass(frozen=True, slots=True)
class Pane:
    """The content of a pane.

    sizes     float64 (k,), ascending, distinct; on the grid the lower edges of the cells
    cells     int64 (k,) when on the grid, else None
    counts    int64 (k,), >= 1
    late      events among them whose stamp was below the floor of their chain
    smallest, largest  exact extremes, also on the grid; NaN in an empty pane
    largest_events     at most LARGEST_KEPT, in their order
    """

    sizes: NDArray[np.float64]
    counts: NDArray[np.int64]
    cells: NDArray[np.int64] | None
    late: int
    smallest: float
    largest: float
    largest_events: tuple[LargeEvent, ...]

    @property
    def n(self) -> int:
        """Number of events."""
        return int(self.counts.sum())

    @property
    def resolution(self) -> str:
        """'exact' or 'grid'."""
        return "exact" if self.cells is None else "grid"


EMPTY = Pane(np.empty(0), np.empty(0, np.int64), None, 0, float("nan"), float("nan"), ())


def counted(keys: NDArray[Key], counts: NDArray[np.int64]) -> tuple[NDArray[Key], NDArray[np.int64]]:
    """Distinct keys ascending with their summed counts (integers, hence exact in any order)."""
    order = np.argsort(keys, kind="stable")
    keys, counts = keys[order], counts[order]
    first = np.flatnonzero(np.concatenate(([True], keys[1:] != keys[:-1])))
    return keys[first], np.add.reduceat(counts, first)


def _rounded(pane: Pane) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Cells and counts of a pane, rounding an exact one."""
    if pane.cells is not None:
        return pane.cells, pane.counts
    return cell_of(pane.sizes), pane.counts


def add(panes: Iterable[Pane], distinct: int) -> Pane:
    """The exact sum of panes.

    Parameters: panes in any order; distinct, how many different sizes may be kept exactly.
    Returns the pane that would have come from all their events at once.
    """
    parts = [pane for pane in panes if pane.counts.size]
    if not parts:
        return EMPTY
    if len(parts) == 1 and (parts[0].cells is not None or parts[0].sizes.size <= distinct):
        return parts[0]
    late = sum(pane.late for pane in parts)
    smallest = min(pane.smallest for pane in parts)
    largest = max(pane.largest for pane in parts)
    events = sorted((event for pane in parts for event in pane.largest_events), key=rank_of)
    cells: NDArray[np.int64] | None = None
    if all(pane.cells is None for pane in parts):
        sizes, counts = counted(
            np.concatenate([pane.sizes for pane in parts]), np.concatenate([pane.counts for pane in parts])
        )
        if sizes.size > distinct:
            cells, counts = counted(cell_of(sizes), counts)
    else:
        rounded = [_rounded(pane) for pane in parts]
        cells, counts = counted(np.concatenate([r[0] for r in rounded]), np.concatenate([r[1] for r in rounded]))
    if cells is not None:
        sizes = edges(cells)
    return Pane(sizes, counts, cells, late, smallest, largest, tuple(events[:LARGEST_KEPT]))


def line_digest(line: bytes) -> str:
    """Eight bytes of BLAKE2b over a line without its end, in hex."""
    return blake2b(line, digest_size=8).hexdigest()


def _body(pane: Pane) -> bytes:
    """The canonical bytes: all that equality means, nothing else."""
    most = int(pane.counts.max()) if pane.counts.size else 0
    width = next(w for w in (1, 2, 4, 8) if most < 1 << (8 * w - 1))
    keys = pane.sizes.astype("<f8") if pane.cells is None else pane.cells.astype("<i4")
    header = _HEADER.pack(
        _MAGIC, pane.cells is not None, width, len(pane.largest_events), pane.sizes.size, pane.n, pane.late,
        pane.smallest, pane.largest,
    )  # fmt: skip
    pack = _EVENT.pack
    events = b"".join([pack(e.size, e.time, bytes.fromhex(e.digest)) for e in pane.largest_events])
    return header + keys.tobytes() + pane.counts.astype(_COUNT_TYPES[width]).tobytes() + events


def digest(pane: Pane) -> str:
    """BLAKE2b (16 bytes, hex) of the content, places left out: equal panes have equal digests."""
    return digest_and_blob(pane)[0]


def encode(pane: Pane) -> bytes:
    """The pane as one BLOB: body, places, CRC-32 over both."""
    return digest_and_blob(pane)[1]


def digest_and_blob(pane: Pane) -> tuple[str, bytes]:
    """What `digest` and `encode` give, for the price of one."""
    body = _body(pane)
    content = body + msgspec.json.encode([event.place for event in pane.largest_events])
    return blake2b(body, digest_size=16).hexdigest(), content + struct.pack("<I", zlib.crc32(content))


def decode(blob: bytes) -> Pane:
    """The pane of a BLOB.

    Raises StoreCorrupt when the CRC or the layout is wrong: SQLite's own check does not look inside a BLOB.
    """
    if len(blob) < _HEADER.size + 4 or blob[:4] != _MAGIC:
        raise StoreCorrupt("a pane's content does not start as one: it was damaged or written by something else")
    content, (crc,) = blob[:-4], struct.unpack("<I", blob[-4:])
    if zlib.crc32(content) != crc:
        raise StoreCorrupt("a pane's content does not match its checksum: a bit of it was changed")
    _, on_grid, width, kept, k, _n, late, smallest, largest = _HEADER.unpack_from(content)
    at = _HEADER.size
    key_type, key_bytes = ("<i4", 4) if on_grid else ("<f8", 8)
    keys = np.frombuffer(content, key_type, k, at)
    at += key_bytes * k
    counts = np.frombuffer(content, _COUNT_TYPES[width], k, at).astype(np.int64)
    at += width * k
    places = msgspec.json.decode(content[at + 24 * kept :], type=list[str])
    named = zip(_EVENT.iter_unpack(content[at : at + 24 * kept]), places, strict=True)
    events = [LargeEvent(size, time, mark.hex(), place) for (size, time, mark), place in named]
    cells = keys.astype(np.int64) if on_grid else None
    sizes = edges(cells) if cells is not None else keys.astype(np.float64)
    return Pane(sizes, counts, cells, late, smallest, largest, tuple(events))
