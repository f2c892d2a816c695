"""Whatever a log goes through, and however often the reader dies: each line once, in the order written.

A random writer appends (also half lines), rotates by renaming or by copying and cutting off, compresses old
files, while a random reader reads, commits and restarts from its last commit. The seeds are fixed, so the test
either holds or does not: false-failure rate nil.
"""

from __future__ import annotations

import gzip
import os
import random
import shutil
from pathlib import Path

import pytest

from tests.sources.follow import Reader, lines

STEPS = 120


class Writer:
    """Writes numbered lines into a log and rotates it in every way; keeps all rotated files."""

    def __init__(self, log: Path, chance: random.Random) -> None:
        self.log, self.chance = log, chance
        self.written: list[bytes] = []
        self.half = b""
        self.file = open(log, "ab", buffering=0)  # noqa: SIM115 - stays open over the steps

    def write(self) -> None:
        n = len(self.written)
        new = lines(n, n + self.chance.randint(1, 60))
        self.written += new
        text = self.half + b"".join(new)
        cut = self.chance.randint(0, len(text)) if self.chance.random() < 0.5 else len(text)
        self.file.write(text[:cut])
        self.half = text[cut:]

    def end_line(self) -> None:
        self.file.write(self.half)
        self.half = b""

    def shift(self) -> None:
        """orders.1 becomes orders.2 and so on, compressed or not."""
        numbers = sorted((int(p.name.split(".")[2]) for p in self.log.parent.glob("a.log.*")), reverse=True)
        for n in numbers:
            for ending in (".gz", ""):
                old = Path(f"{self.log}.{n}{ending}")
                if old.exists():
                    old.rename(f"{self.log}.{n + 1}{ending}")

    def rename(self) -> None:
        self.end_line()
        self.shift()
        self.log.rename(f"{self.log}.1")
        self.log.touch()
        if self.chance.random() < 0.3:
            self.write()  # the writer has not noticed yet
            self.end_line()
        self.file.close()
        self.file = open(self.log, "ab", buffering=0)  # noqa: SIM115

    def copy_and_cut(self) -> None:
        self.end_line()
        self.shift()
        shutil.copy(self.log, f"{self.log}.1")
        os.truncate(self.log, 0)

    def pack(self) -> None:
        plain = [p for p in self.log.parent.glob("a.log.*") if p.suffix != ".gz"]
        for path in plain:
            with gzip.open(f"{path}.gz", "wb") as packed:
                packed.write(path.read_bytes())
            path.unlink()


class Consumer(Reader):
    """A reader that commits now and then, and after a crash has only what it committed."""

    together = True

    def begin(self) -> None:
        self.committed: tuple[list[bytes], dict[str, str]] = ([], {})

    def commit(self, chance: random.Random) -> None:
        before = self.committed[1]
        self.committed = (list(self.got), dict(self.bookmarks))
        if not self.together and chance.random() < 0.5:  # a crash between two transactions
            self.committed = (list(self.got), before)
            self.crash()

    def crash(self) -> None:
        self.got, self.bookmarks = list(self.committed[0]), dict(self.committed[1])
        self.restart()


class CarelessConsumer(Consumer):
    """Commits lines and bookmarks in two transactions."""

    together = False


def story(folder: Path, seed: int, kind: type[Consumer], pattern: str = "a.log") -> tuple[list[bytes], list[bytes]]:
    """Run one random story: the lines written and the lines that arrived."""
    chance = random.Random(seed)
    writer = Writer(folder / "a.log", chance)
    writer.write()
    writer.end_line()
    reader = kind(folder, pattern, limit=4096)
    reader.begin()
    reader.take(reader.source.poll(4096))
    reader.commit(chance)
    for _ in range(STEPS):
        what = chance.random()
        if what < 0.35:
            writer.write()
        elif what < 0.65:
            reader.take(reader.source.poll(chance.choice([1, 3000, 100_000])))
        elif what < 0.8:
            reader.commit(chance)
        elif what < 0.88:
            reader.crash()
        elif what < 0.92:
            writer.rename()
        elif what < 0.96:
            writer.copy_and_cut()
        elif what < 0.98:
            writer.pack()
        else:
            reader.read()
    try:
        writer.end_line()
        reader.read(quiet=10)
        reader.take(reader.source.finish())
    finally:
        writer.file.close()
        reader.stop()
    return writer.written, reader.got


# The last three: copies that were cut off before anything was read of them.
@pytest.mark.parametrize("seed", [*range(40), 125, 205, 372])
def test_every_line_arrives_once_and_in_order(tmp_path: Path, seed: int) -> None:
    written, got = story(tmp_path, seed, Consumer, "a.log*" if seed % 2 else "a.log")
    assert got == written


def test_bookmarks_committed_apart_from_the_lines_count_twice(tmp_path: Path) -> None:
    """The negative control: without one commit for both the same stories go wrong."""
    wrong = 0
    for seed in range(5):
        folder = tmp_path / str(seed)
        folder.mkdir()
        written, got = story(folder, seed, CarelessConsumer)
        wrong += got != written
    assert wrong > 0
