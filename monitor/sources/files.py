"""Followed files: which paths the patterns mean, each a chain; lines from all of them in turn.

A path that is only a rotated name of another followed path is no chain of its own, nor is a second name of a
file that is already followed. Nothing here waits, and nothing runs beside it: the caller polls.
"""

from __future__ import annotations

import glob
import os
import stat
from collections.abc import Mapping, Sequence

from monitor.sources.chain import Chain
from monitor.sources.content import UNREADABLE_PACKING, Incomplete
from monitor.sources.family import base_of, family, matches
from monitor.sources.finder import Inode
from monitor.sources.marks import Mark, read_bookmark
from monitor.sources.source import Block, ChainStatus, FollowFiles

_SMALLEST_SHARE = 1 << 18
_OPEN_FILES = 200  # chains that keep their file open while it is quiet
_BUSY_POLLS = 8  # while there is much to read, look for new files only so often


class FileSource:
    """A Source over files. See source.Source for the methods."""

    def __init__(self, feed: FollowFiles, bookmarks: Mapping[str, str]) -> None:
        """Find the files and resume at the bookmarks. Raises SourceError for a bookmark that cannot be read."""
        self.max_line = feed.max_line
        base = os.path.abspath(feed.base)
        self._patterns = [os.path.normpath(os.path.join(base, p)) for p in feed.patterns]
        self._chains: dict[str, Chain] = {}
        self._rotated: dict[str, str] = {}  # rotated name -> chain it belongs to
        self._standing: dict[tuple[str, str], str] = {}  # file or pattern -> its trouble, told already
        self._news: list[str] = []
        self._turn = self._since_discovery = self._busy = 0
        for name, text in sorted(bookmarks.items()):
            if self._asked_for(name):
                self._chains[name] = Chain(name, self, read_bookmark(text, name))
        for chain in self._chains.values():
            self._begin(chain)
        self._discover()

    # -- Source

    def poll(self, limit: int) -> list[Block]:
        """New lines, about `limit` bytes at most, fair over the chains; [] when there is nothing new."""
        self._since_discovery += 1
        if not self._busy or self._since_discovery >= _BUSY_POLLS:
            self._discover()
        blocks: list[Block] = []
        budget, share = limit, min(limit, max(_SMALLEST_SHARE, limit // max(1, self._busy)))
        names = list(self._chains)
        order = names[self._turn :] + names[: self._turn]
        busy, reached = set(), 0
        for name in order:
            reached += 1
            got = self._chains[name].advance(min(share, budget))
            blocks += got
            budget -= sum(len(b.data) for b in got)
            if got:
                busy.add(name)
            if budget <= 0:
                break
        self._turn = (self._turn + reached) % max(1, len(names))
        self._busy = len(busy)
        self._close_quiet(busy)
        return blocks

    def chains(self) -> list[ChainStatus]:
        """All chains known now, those without new lines too."""
        return [chain.status() for chain in self._chains.values()]

    def finish(self) -> list[Block]:
        """Take the ends of the files as their ends; poll until nothing comes before, to keep memory small."""
        self._discover()
        blocks: list[Block] = []
        for chain in self._chains.values():
            while got := chain.advance(1 << 20, finishing=True):
                blocks += got
        return blocks

    def troubles(self) -> list[str]:
        """Sentences for people about what went wrong since the last call; each told once until it changes."""
        news, self._news = self._news, []
        return news

    def close(self) -> None:
        """Give back the files."""
        for chain in self._chains.values():
            chain.close()

    # -- World of the chains

    def owner(self, inode: Inode) -> Chain | None:
        """The chain that is reading a file."""
        return next(
            (c for c in self._chains.values() if c.reading is not None and c.reading.content.inode == inode), None
        )

    def finished(self, inode: Inode) -> Sequence[Mark]:
        """Marks of files of this inode that some chain has read to the end."""
        return [m for c in self._chains.values() for m in c.finished if (m.device, m.inode) == inode]

    def first_files(self, own: str) -> list[str]:
        """Rotated files of a path that the patterns ask for as well, oldest first."""
        return [path for path in family(own) if self._asked_for(path)]

    def tell(self, path: str, trouble: str | None) -> None:
        """State the trouble with a path; None: all is well again."""
        self._state(("file", path), trouble)

    def _state(self, about: tuple[str, str], trouble: str | None) -> None:
        if trouble is None:
            self._standing.pop(about, None)
        elif self._standing.get(about) != trouble:
            self._standing[about] = trouble
            self._news.append(f"{about[1]}: {trouble}")

    # -- finding files

    def _asked_for(self, path: str) -> bool:
        return any(matches(path, pattern) for pattern in self._patterns)

    def _begin(self, chain: Chain) -> None:
        """Open a resumed chain's file at once, so that no new chain takes it for its own."""
        try:
            if chain.reading is None:
                chain.begin()
        except (OSError, Incomplete):
            return  # told when it is read

    def _discover(self) -> None:
        self._since_discovery = 0
        found = self._matching()
        new = [p for p in found if p not in self._chains and self._rotated.get(p) not in self._chains]
        if not new:
            return
        ours = {inode for name in self._chains if (inode := self._inode(name)) is not None}
        for path in new:
            base = base_of(path, list(self._chains)) or base_of(path, found)
            if base is not None:
                self._rotated[path] = base
                continue
            inode = self._inode(path)
            if inode is None or inode in ours or self.owner(inode) is not None:
                continue
            if any(self._is_finished(path, mark) for mark in self.finished(inode)):
                continue
            ours.add(inode)
            self._chains[path] = Chain(path, self)

    def _matching(self) -> list[str]:
        found: set[str] = set()
        for pattern in self._patterns:
            paths = glob.glob(pattern, recursive=True)
            missing = None if paths else "no such file yet; it is followed as soon as there is one"
            self._state(("pattern", pattern), missing)
            found.update(paths)
        return sorted(found)

    def _is_finished(self, path: str, mark: Mark) -> bool:
        chain = next(c for c in self._chains.values() if mark in c.finished)
        return chain.finder.is_marked(path, mark)

    def _inode(self, path: str) -> Inode | None:
        """Device and inode of a file that can be followed, else None with the trouble told."""
        try:
            status = os.stat(path)
        except OSError:
            return None
        if not stat.S_ISREG(status.st_mode):
            what = "a folder" if stat.S_ISDIR(status.st_mode) else "no regular file"
            self.tell(path, f"is {what}, not followed; a pattern such as {path}/*.log means the files in a folder")
            return None
        if path.endswith(UNREADABLE_PACKING):
            self.tell(path, "is compressed in a way that is not read here; unpack it or use gzip")
            return None
        return status.st_dev, status.st_ino

    def _close_quiet(self, busy: set[str]) -> None:
        """Keep no more files open than _OPEN_FILES; a quiet one is found again by its mark."""
        held = [c for name, c in self._chains.items() if c.reading is not None and name not in busy]
        for chain in held[: max(0, len(held) - _OPEN_FILES)]:
            chain.rest()
