"""One followed path through its rotations: which file is read now, when it is finished, which comes next.

The files of a chain are read one after the other, never two at once, so the order of its lines does not depend
on when they were seen. A file is finished when another stands at the path, has content (its writer has moved
over) and the old one stayed quiet for SETTLE polls. The next one is the next younger rotated file beside the
path, at last the path itself. After a restart the file of the bookmark is looked for at the path and among its
rotated names, by inode first, then by content, compressed ones last.
"""

from __future__ import annotations

from collections.abc import Sequence

from monitor.rejects import OVER_LONG, Rejected
from monitor.sources.content import Content, Incomplete, open_content, same_content
from monitor.sources.cutting import Taken
from monitor.sources.family import family
from monitor.sources.finder import Finder, World, inode_of, is_packed, status_of, version_of
from monitor.sources.marks import KEPT_EMPTY, KEPT_FINISHED, VERSION, Bookmark, Mark, write_bookmark
from monitor.sources.reading import Changed, Reading
from monitor.sources.source import Block, ChainStatus

SETTLE = 3  # quiet polls before a file whose writer has moved over counts as finished
_LONGEST_HEADER = 1000  # of a first line that is carried over a cut; longer ones are not
PATIENCE = 50  # polls to wait for a compressed file that stays incomplete


class Chain:
    """Follows one path. See the module's text for the rules."""

    def __init__(self, own: str, world: World, bookmark: Bookmark | None = None) -> None:
        self.own = own
        self.reading: Reading | None = None
        self.finished: list[Mark] = list(bookmark.finished) if bookmark else []
        self.at_end = False
        self._world = world
        self.finder = Finder(own, world)
        self._resume = bookmark.current if bookmark else None
        self._quiet = self._waited = 0
        self._carried = bookmark.carried if bookmark else b""
        self._coming = bookmark.coming if bookmark else b""
        self._packed: list[tuple[int, ...] | None] = []
        self._resting: tuple[int, ...] | None = None

    def status(self) -> ChainStatus:
        """How far the chain is."""
        r = self.reading
        if r is None and self._resume is not None:  # the file is closed for now, or looked for
            mark, status = self._resume, status_of(self._resume.path)
            size, modified = (mark.position, None) if status is None else (status.st_size, status.st_mtime_ns)
            return ChainStatus(self.own, self.at_end, mark.path, max(size, mark.position), mark.position, modified)
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
            self._resting = version_of(self.own)
            self.close()

    def advance(self, limit: int, *, finishing: bool = False) -> list[Block]:
        """The next blocks, about `limit` bytes; [] when there is nothing new."""
        if self._resting is not None and self._resting == version_of(self.own) and not finishing:
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
        following = self.finder.following(self.finished[-1], self.finished)
        inodes = [inode_of(p) for p in rotated]
        place = inodes.index(reading.content.inode) if reading.content.inode in inodes else 0
        older = rotated if self._is_own(reading) else rotated[:place]
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
        header = reading.header() if taken.data else None
        lost = header is not None and self._carried not in (b"", header)
        return Block(
            chain=self.own,
            data=taken.data,
            offset=offset,
            first=offset == 0 and not lost,
            header=self._carried if lost else header,
            bookmark=self._bookmark(),
            rejected=() if refused is None else (Rejected(OVER_LONG, 0, refused),),
            rejected_counts={} if refused is None else {OVER_LONG: 1},
            holes=taken.holes,
        )

    def _bookmark(self) -> str:
        current = self.reading.mark() if self.reading is not None and self.reading.position else None
        return write_bookmark(Bookmark(VERSION, current, tuple(self.finished), self._carried, self._coming))

    def _at_end_of_file(self, reading: Reading, finishing: bool) -> list[Block]:
        """Decide whether more may come here, or the file is finished."""
        self.at_end = True
        status = status_of(self.own)
        if self._is_own(reading):
            self._quiet = 0
            return self._last_line(reading) if finishing or reading.finite else []
        if self._replaced(reading):
            return []
        following = self.finder.following(reading.mark(), self.finished)
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
        copy = self.finder.opened_if_same(self.own, reading.mark())
        if copy is None:
            return False
        self._go_on(copy, reading.mark(), finite=False)
        return True

    def _truncated(self, reading: Reading) -> list[Block]:
        """The file began anew in place: read the rest from a copy if there is one."""
        mark, unread = reading.mark(), max(0, reading.size - reading.position)
        self._coming = self._carried or (reading.known_header() or b"")[:_LONGEST_HEADER]
        rotated = family(self.own)[::-1]
        for path in [p for p in rotated if not is_packed(p)] + [p for p in rotated if is_packed(p)]:
            if (copy := self.finder.opened_if_same(path, mark)) is not None:
                self._go_on(copy, mark, finite=True)
                return []
        if unread:
            self._world.tell(
                self.own, f"it was cut off at byte {mark.position} before {unread} bytes more were read; they are lost"
            )
        self._finish(reading)
        return [self._news()]

    def _incomplete(self, finishing: bool) -> list[Block]:
        packed = [version_of(p) for p in [self.own, *family(self.own)] if is_packed(p)]
        self._waited = self._waited + 1 if packed == self._packed else 0
        self._packed = packed
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
        return inode_of(self.own) == reading.content.inode

    # -- finding the file to read

    def begin(self) -> bool:
        """Open the file to go on with, if there is one. Raises OSError, Incomplete."""
        if self._resume is not None:
            return self._find_again(self._resume)
        last = self.finished[-1] if self.finished else None
        if last is None:
            path = next(
                (p for p in [*self._world.first_files(self.own), self.own] if self.finder.free(p, self.finished)), None
            )
        else:
            path = self.finder.following(last, self.finished)
        if path is None:
            self.at_end = True
            return False
        content = open_content(path)
        if last is not None and path == self.own and _same(content, last) and last.position:
            self.finished.pop()  # it was taken as finished, but nothing took its place: go on
            self._go_on(content, last, finite=False)
        else:
            self._carried, self._coming = self._coming if path == self.own else b"", b""
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
        for path in self.finder.whereabouts(mark, self):
            try:
                content = self.finder.opened_if_same(path, mark)
            except Incomplete:
                waiting = True
                continue
            if content is not None:
                self._go_on(content, mark, finite=False)
                if path != self.own and inode_of(self.own) == (mark.device, mark.inode):  # cut off meanwhile
                    self._coming = self._carried or self._now().header()[:_LONGEST_HEADER]
                return True
        self.at_end = True
        if waiting and self._waited < PATIENCE:
            raise Incomplete
        if status_of(self.own) is None:
            return False  # nothing to read instead: it may come back
        self._world.tell(
            self.own,
            f"the file read so far is gone ({mark.position} bytes of it were read); what it held beyond is lost",
        )
        self._resume = None
        self.finished = _kept([*self.finished, mark])
        return self.begin()

    def _tell_os(self, path: str, error: OSError) -> None:
        self._world.tell(path, f"cannot be read: {(error.strerror or str(error)).lower()}; other files go on")


def _kept(marks: Sequence[Mark]) -> list[Mark]:
    """The last finished files; empty ones are many where rotation goes by the clock, and tell little."""
    full = set([m for m in marks if m.position][-KEPT_FINISHED:])
    empty = set([m for m in marks if not m.position][-KEPT_EMPTY:])
    return [m for m in marks if m in full or m in empty]


def _same(content: Content, mark: Mark) -> bool:
    return content.inode == (mark.device, mark.inode) and same_content(content, mark)
