"""One followed path through its rotations: which file is read now, when it is finished, which comes next.

The files of a chain are read one after the other, never two at once, so the order of its lines does not depend
on when they were seen. A file is finished when another stands at the path, has content (its writer has moved
over) and the old one stayed quiet for SETTLE polls. The next one is the next younger rotated file beside the
path, at last the path itself. After a restart the file of the bookmark is looked for at the path and among its
rotated names, by inode first, then by content, compressed ones last.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator, Sequence
from typing import Protocol

from monitor.rejects import OVER_LONG, Rejected
from monitor.sources.content import Content, Incomplete, open_content, same_content
from monitor.sources.cutting import Taken
from monitor.sources.family import family
from monitor.sources.marks import KEPT_EMPTY, KEPT_FINISHED, Bookmark, Mark, write_bookmark
from monitor.sources.reading import Changed, Reading
from monitor.sources.source import Block, ChainStatus

SETTLE = 3  # quiet polls before a file whose writer has moved over counts as finished
_COMPARISONS = 4096
PATIENCE = 50  # polls to wait for a compressed file that stays incomplete

Inode = tuple[int, int]


class World(Protocol):
    """What a chain needs to know of the others, and where it tells its troubles."""

    max_line: int

    def owner(self, inode: Inode) -> Chain | None:
        """The chain that is reading a file."""
        ...

    def finished(self, inode: Inode) -> Sequence[Mark]:
        """Marks of files of this inode that some chain has read to the end."""
        ...

    def first_files(self, own: str) -> list[str]:
        """Rotated files of a path that the patterns ask for as well, oldest first."""
        ...

    def tell(self, path: str, trouble: str | None) -> None:
        """State the trouble with a path; None: all is well again."""
        ...


class Chain:
    """Follows one path. See the module's text for the rules."""

    def __init__(self, own: str, world: World, bookmark: Bookmark | None = None) -> None:
        self.own = own
        self.reading: Reading | None = None
        self.finished: list[Mark] = list(bookmark.finished) if bookmark else []
        self.at_end = False
        self._world = world
        self._resume = bookmark.current if bookmark else None
        self._quiet = self._waited = 0
        # What was found for a version of a file: comparing compressed ones is dear.
        self._compared: dict[tuple[str, tuple[int, ...], Mark], bool] = {}
        self._resting: tuple[int, ...] | None = None

    def status(self) -> ChainStatus:
        """How far the chain is."""
        r = self.reading
        if r is None:
            return ChainStatus(self.own, self.at_end, None, 0, 0)
        return ChainStatus(self.own, self.at_end, r.content.path, r.size, r.position, r.content.modified())

    def close(self) -> None:
        """Give back the file."""
        if self.reading is not None:
            self.reading.content.close()
            self.reading = None

    def rest(self) -> None:
        """Give back the file, to be found again by its mark when the chain is next read."""
        if self.reading is not None and self.reading.position and not self.reading.finite:
            self._resume = self.reading.mark()
            self._resting = _version(self.own)
            self.close()

    def advance(self, limit: int, *, finishing: bool = False) -> list[Block]:
        """The next blocks, about `limit` bytes; [] when there is nothing new."""
        if self._resting is not None and self._resting == _version(self.own) and not finishing:
            return []
        self._resting = None
        try:
            if self.reading is None and not self.begin():
                return []
            return self._take(limit, finishing)
        except Incomplete:
            return self._incomplete(finishing)
        except OSError as error:
            self._tell_os(self.own, error)
            self.at_end = True
            return []

    # -- reading the file at hand

    def _take(self, limit: int, finishing: bool) -> list[Block]:
        reading = self._now()
        if not reading.position and self._overtaken(reading, finishing):
            return [self._news()]
        try:
            taken = reading.take(limit, max_line=self._world.max_line)
        except Changed:
            return self._truncated(reading)
        if taken is None:
            return self._at_end_of_file(reading, finishing)
        self._quiet = self._waited = 0
        self.at_end = False
        self._world.tell(self.own, None)
        return [self._block(reading, taken)]

    def _overtaken(self, reading: Reading, finishing: bool) -> bool:
        """Whether a rotated file came to lie before the one at hand, of which nothing was read yet.

        So it is when the path was copied and cut off between two polls: what is read next is in the copy.
        """
        before, reading.size = reading.size, reading.content.size()
        if not (self.finished and (finishing or before or reading.size)):
            return False
        rotated = family(self.own)
        following = self._following(self.finished[-1])
        place = _place(rotated, lambda p: _inode(p) == reading.content.inode)
        older = rotated if self._is_own(reading) else rotated[: place or 0]
        if following not in older:
            return False
        self.close()
        return True

    def _now(self) -> Reading:
        assert self.reading is not None
        return self.reading

    def _block(self, reading: Reading, taken: Taken) -> Block:
        offset = reading.position - taken.consumed + taken.start
        refused = taken.refused
        return Block(
            chain=self.own,
            data=taken.data,
            offset=offset,
            first=offset == 0,
            header=reading.header() if taken.data else None,
            bookmark=self._bookmark(),
            rejected=() if refused is None else (Rejected(OVER_LONG, 0, refused),),
            rejected_counts={} if refused is None else {OVER_LONG: 1},
            holes=taken.holes,
        )

    def _bookmark(self) -> str:
        current = self.reading.mark() if self.reading is not None and self.reading.position else None
        return write_bookmark(current, tuple(self.finished))

    def _at_end_of_file(self, reading: Reading, finishing: bool) -> list[Block]:
        """Decide whether more may come here, or the file is finished."""
        self.at_end = True
        status = _status(self.own)
        if self._is_own(reading):
            self._quiet = 0
            return self._last_line(reading) if finishing or reading.finite else []
        if self._replaced(reading):
            return []
        following = self._following(reading.mark())
        if following is None and reading.content.links():
            return self._last_line(reading) if finishing else []
        if following == self.own and not (finishing or reading.finite or (status and status.st_size)):
            return []  # the writer has not moved over yet
        self.at_end = following is None
        self._quiet += 1
        if self._quiet < SETTLE and not finishing and not reading.finite:
            return []
        return self._end(reading)

    def _last_line(self, reading: Reading) -> list[Block]:
        taken = reading.take(self._world.max_line, max_line=self._world.max_line, final=True)
        return [] if taken is None else [self._block(reading, taken)]

    def _end(self, reading: Reading) -> list[Block]:
        """The file is finished: deliver a last line without newline, and the news that it is."""
        blocks = self._last_line(reading)
        self._finish(reading)
        return [*blocks, self._news()]

    def _finish(self, reading: Reading) -> None:
        self.finished = _kept([*self.finished, reading.mark()])
        self.close()
        self._quiet = self._waited = 0

    def _news(self) -> Block:
        return Block(self.own, b"", 0, False, None, self._bookmark())

    def _replaced(self, reading: Reading) -> bool:
        """Whether the file was replaced by a longer copy of itself (no name is left of the old one)."""
        if reading.content.links() or reading.finite or not reading.position:
            return False
        copy = self._opened_if_same(self.own, reading.mark())
        if copy is None:
            return False
        self._go_on(copy, reading.mark(), finite=False)
        return True

    def _truncated(self, reading: Reading) -> list[Block]:
        """The file began anew in place: read the rest from a copy if there is one."""
        mark, unread = reading.mark(), max(0, reading.size - reading.position)
        rotated = family(self.own)[::-1]
        for path in [p for p in rotated if not _packed(p)] + [p for p in rotated if _packed(p)]:
            if (copy := self._opened_if_same(path, mark)) is not None:
                self._go_on(copy, mark, finite=True)
                return []
        if unread:
            self._world.tell(
                self.own, f"it was cut off at byte {mark.position} before {unread} bytes more were read; they are lost"
            )
        self._finish(reading)
        return [self._news()]

    def _incomplete(self, finishing: bool) -> list[Block]:
        self._waited += 1
        path = self.own if self.reading is None else self.reading.content.path
        self._world.tell(path, "the compressed file is not complete, or damaged; waiting for it to be completed")
        self.at_end = finishing or self._waited > PATIENCE
        if not self.at_end or self.reading is None or self._is_own(self.reading):
            return []
        self._world.tell(path, "the compressed file stayed incomplete; what is missing of it is lost")
        reading = self.reading
        self._finish(reading)
        return [self._news()]

    def _is_own(self, reading: Reading) -> bool:
        return _inode(self.own) == reading.content.inode

    # -- finding the file to read

    def begin(self) -> bool:
        """Open the file to go on with, if there is one. Raises OSError, Incomplete."""
        if self._resume is not None:
            return self._find_again(self._resume)
        last = self.finished[-1] if self.finished else None
        if last is None:
            path = next((p for p in [*self._world.first_files(self.own), self.own] if self._free(p)), None)
        else:
            path = self._following(last)
        if path is None:
            self.at_end = True
            return False
        content = open_content(path)
        if last is not None and path == self.own and _same(content, last) and last.position:
            self.finished.pop()  # it was taken as finished, but nothing took its place: go on
            self._go_on(content, last, finite=False)
        else:
            self._go_on(content, None, finite=False)
        return True

    def _go_on(self, content: Content, mark: Mark | None, *, finite: bool) -> None:
        self.close()
        self._resume = None
        try:
            self.reading = Reading(content, mark, finite=finite)
        except (Incomplete, OSError):
            content.close()
            raise
        self._quiet = 0

    def _find_again(self, mark: Mark) -> bool:
        """Open the marked file wherever it is now."""
        waiting = False
        for path in self._whereabouts(mark):
            try:
                content = self._opened_if_same(path, mark)
            except Incomplete:
                waiting = True
                continue
            if content is not None:
                self._go_on(content, mark, finite=False)
                return True
        self.at_end = True
        if waiting and self._waited < PATIENCE:
            raise Incomplete
        if _status(self.own) is None:
            return False  # nothing to read instead: it may come back
        self._world.tell(
            self.own,
            f"the file read so far is gone ({mark.position} bytes of it were read); what it held beyond is lost",
        )
        self._resume = None
        self.finished = _kept([*self.finished, mark])
        return self.begin()

    def _whereabouts(self, mark: Mark) -> Iterator[str]:
        """Paths where the marked content may be: by inode, then plain files, then compressed ones."""
        rotated = family(self.own)[::-1]
        paths = list(dict.fromkeys([self.own, mark.path, *rotated]))
        inodes = {p: inode for p in paths if (inode := _inode(p)) is not None}
        here = (mark.device, mark.inode)
        yield from (p for p in inodes if inodes[p] == here)
        others = [p for p in inodes if inodes[p] != here and self._world.owner(inodes[p]) in (None, self)]
        yield from (p for p in others if not _packed(p))
        yield from (p for p in others if _packed(p))

    def _following(self, last: Mark) -> str | None:
        """The file after a finished one: the next younger rotated file, else the path itself."""
        rotated = family(self.own)
        place = None
        for mark in [last, *self.finished[::-1]]:
            if mark.position:  # an empty file cannot be told from another
                place = _place(rotated, lambda p, m=mark: self.is_marked(p, m))  # type: ignore[misc]
                if place is None:  # it may have been copied or compressed meanwhile
                    place = _place(rotated, lambda p, m=mark: self.is_marked(p, m, by_inode=False))  # type: ignore[misc]
            if place is not None:
                break
        younger = rotated[place + 1 :] if place is not None else []
        return next((p for p in [*younger, self.own] if self._free(p)), None)

    def is_marked(self, path: str, mark: Mark, *, by_inode: bool = True) -> bool:
        """Whether the content of a mark stands at a path."""
        version = _version(path)
        if version is None or (by_inode and version[:2] != (mark.device, mark.inode)):
            return False
        known = self._compared.get((path, version, mark))
        if known is None:
            if len(self._compared) >= _COMPARISONS:
                self._compared.clear()
            known = self._compared[path, version, mark] = self._compare(path, mark)
        return known

    def _compare(self, path: str, mark: Mark) -> bool:
        try:
            content = self._opened_if_same(path, mark)
        except (Incomplete, OSError):
            return False
        if content is None:
            return False
        content.close()
        return True

    def _free(self, path: str) -> bool:
        """Whether a file exists that nobody reads or has read."""
        inode = _inode(path)
        if inode is None or self._world.owner(inode) is not None:
            return False
        return not any(
            self.is_marked(path, m, by_inode=True)
            for m in self._world.finished(inode)
            if not (path == self.own and self.finished and m == self.finished[-1])
        )

    def _opened_if_same(self, path: str, mark: Mark) -> Content | None:
        try:
            content = open_content(path)
        except OSError:
            return None
        try:
            if same_content(content, mark):
                return content
        except (OSError, Incomplete):
            content.close()
            raise
        content.close()
        return None

    def _tell_os(self, path: str, error: OSError) -> None:
        self._world.tell(path, f"cannot be read: {(error.strerror or str(error)).lower()}; other files go on")


def _kept(marks: Sequence[Mark]) -> list[Mark]:
    """The last finished files; empty ones are many where rotation goes by the clock, and tell little."""
    full = set([m for m in marks if m.position][-KEPT_FINISHED:])
    empty = set([m for m in marks if not m.position][-KEPT_EMPTY:])
    return [m for m in marks if m in full or m in empty]


def _place(paths: Sequence[str], is_it: Callable[[str], bool]) -> int | None:
    return next((i for i in range(len(paths) - 1, -1, -1) if is_it(paths[i])), None)


def _same(content: Content, mark: Mark) -> bool:
    return content.inode == (mark.device, mark.inode) and same_content(content, mark)


def _status(path: str) -> os.stat_result | None:
    try:
        return os.stat(path)
    except OSError:
        return None


def _inode(path: str) -> Inode | None:
    status = _status(path)
    return None if status is None else (status.st_dev, status.st_ino)


def _version(path: str) -> tuple[int, ...] | None:
    status = _status(path)
    return None if status is None else (status.st_dev, status.st_ino, status.st_size, status.st_mtime_ns)


def _packed(path: str) -> bool:
    return path.endswith(".gz")
