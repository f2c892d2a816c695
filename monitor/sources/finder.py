"""Where a file is now that was read before, and which comes after it.

Looked for at the followed path and among its rotated names, by inode first, then by content, compressed files
last. Nothing is read here beyond what tells one file from another.
"""

from __future__ import annotations

import os
from collections.abc import Callable, Iterator, Sequence
from typing import Protocol

from monitor.sources.content import Content, Incomplete, open_content, same_content
from monitor.sources.family import family
from monitor.sources.marks import Mark

_COMPARISONS = 4096

Inode = tuple[int, int]


class World(Protocol):
    """What a chain needs to know of the others, and where it tells its troubles."""

    max_line: int

    def owner(self, inode: Inode) -> object | None:
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


class Finder:
    """Finds the files of one followed path."""

    def __init__(self, own: str, world: World) -> None:
        self._own, self._world = own, world
        # What was found for a version of a file: comparing compressed ones is dear.
        self._compared: dict[tuple[str, tuple[int, ...], Mark], bool] = {}

    def whereabouts(self, mark: Mark, me: object) -> Iterator[str]:
        """Paths where the marked content may be: by inode, then plain files, then compressed ones."""
        rotated = family(self._own)[::-1]
        paths = list(dict.fromkeys([self._own, mark.path, *rotated]))
        inodes = {p: inode for p in paths if (inode := inode_of(p)) is not None}
        here = (mark.device, mark.inode)
        yield from (p for p in inodes if inodes[p] == here)
        others = [p for p in inodes if inodes[p] != here and self._world.owner(inodes[p]) in (None, me)]
        yield from (p for p in others if not is_packed(p))
        yield from (p for p in others if is_packed(p))

    def following(self, last: Mark, finished: Sequence[Mark]) -> str | None:
        """The file after a finished one: the next younger rotated file, else the path itself."""
        rotated = family(self._own)
        place = None
        for mark in [last, *finished[::-1]]:
            if mark.position:  # an empty file cannot be told from another
                place = _place(rotated, lambda p, m=mark: self.is_marked(p, m))  # type: ignore[misc]
                if place is None:  # it may have been copied or compressed meanwhile
                    place = _place(rotated, lambda p, m=mark: self.is_marked(p, m, by_inode=False))  # type: ignore[misc]
            if place is not None:
                break
        younger = rotated[place + 1 :] if place is not None else []
        return next((p for p in [*younger, self._own] if self.free(p, finished)), None)

    def is_marked(self, path: str, mark: Mark, *, by_inode: bool = True) -> bool:
        """Whether the content of a mark stands at a path."""
        version = version_of(path)
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
            content = self.opened_if_same(path, mark)
        except (Incomplete, OSError):
            return False
        if content is None:
            return False
        content.close()
        return True

    def free(self, path: str, finished: Sequence[Mark]) -> bool:
        """Whether a file exists that nobody reads or has read; `finished` are the chain's own."""
        inode = inode_of(path)
        if inode is None or self._world.owner(inode) is not None:
            return False
        return not any(
            self.is_marked(path, m, by_inode=True)
            for m in self._world.finished(inode)
            if not (path == self._own and finished and m == finished[-1])
        )

    @staticmethod
    def opened_if_same(path: str, mark: Mark) -> Content | None:
        """The file at a path, open, if its content is the marked one. Raises Incomplete."""
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


def _place(paths: Sequence[str], is_it: Callable[[str], bool]) -> int | None:
    return next((i for i in range(len(paths) - 1, -1, -1) if is_it(paths[i])), None)


def status_of(path: str) -> os.stat_result | None:
    """What the system says of a path, None when there is nothing."""
    try:
        return os.stat(path)
    except OSError:
        return None


def inode_of(path: str) -> Inode | None:
    """Device and inode of the file at a path."""
    status = status_of(path)
    return None if status is None else (status.st_dev, status.st_ino)


def version_of(path: str) -> tuple[int, ...] | None:
    """What changes when a file is replaced or written to; the inode's two numbers come first."""
    status = status_of(path)
    return None if status is None else (status.st_dev, status.st_ino, status.st_size, status.st_mtime_ns)


def is_packed(path: str) -> bool:
    """Whether a name says that the file is compressed."""
    return path.endswith(".gz")
