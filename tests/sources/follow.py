"""A followed folder for tests: write, rotate, read, restart; and what was delivered."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path

from monitor.sources import FollowFiles, open_source
from monitor.sources.source import MAX_LINE, Block


def lines(first: int, last: int) -> list[bytes]:
    """Distinct lines, numbered."""
    return [b'{"n":%d,"units":%d,"dock":"north"}\n' % (i, i * 7919 % 1000 + 1) for i in range(first, last)]


def append(path: Path, what: Iterable[bytes]) -> None:
    with open(path, "ab") as file:
        file.write(b"".join(what))


class Reader:
    """A source with its consumer: lines and bookmarks are kept together, as one commit would."""

    def __init__(self, folder: Path, *patterns: str, max_line: int = MAX_LINE, limit: int = 1 << 20) -> None:
        self.feed = FollowFiles(patterns=patterns or ("a.log",), base=folder, max_line=max_line)
        self.limit = limit
        self.bookmarks: dict[str, str] = {}
        self.got: list[bytes] = []
        self.blocks: list[Block] = []
        self.rejected: dict[str, int] = {}
        self.troubles: list[str] = []
        self.source = open_source(self.feed, {})

    def take(self, blocks: list[Block]) -> None:
        for block in blocks:
            assert not block.data or block.data.endswith(b"\n")
            self.blocks.append(block)
            self.got += block.data.splitlines(keepends=True)
            self.bookmarks[block.chain] = block.bookmark
            for reason, count in block.rejected_counts.items():
                self.rejected[reason] = self.rejected.get(reason, 0) + count
        self.troubles += self.source.troubles()

    def read(self, quiet: int = 6) -> Reader:
        """Poll until nothing came for some polls."""
        still = polls = 0
        while still < quiet:
            polls += 1
            assert polls < 20_000, "the source never comes to rest"
            blocks = self.source.poll(self.limit)
            self.take(blocks)
            still = 0 if blocks else still + 1
        return self

    def stop(self) -> Reader:
        self.source.close()
        return self

    def restart(self) -> Reader:
        self.source.close()
        self.source = open_source(self.feed, dict(self.bookmarks))
        return self

    def finish(self) -> Reader:
        self.take(self.source.finish())
        return self
