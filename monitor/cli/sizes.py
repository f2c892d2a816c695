"""Whole files or standard input, read once into sizes: what `fit` judges."""

from __future__ import annotations

import gzip
import sys
from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from pathlib import Path
from typing import BinaryIO

import numpy as np
from numpy.typing import NDArray

from monitor.errors import SourceError
from monitor.parse import compile_parser
from monitor.parse.lines import LineFormat, Parser
from monitor.rejects import OVER_LONG, Rejected
from monitor.sources.source import MAX_LINE

BLOCK = 4 << 20
LARGE = 256 << 20
"""Bytes from which on compiled parsers win back the time that it takes to load them."""


@dataclass(slots=True)
class Sizes:
    """Everything read so far: chunks of sizes, the range of stamps, and the account of lines that gave none."""

    chunks: list[NDArray[np.float64]] = field(default_factory=list)
    first: int | None = None
    last: int | None = None
    skipped: Counter[str] = field(default_factory=Counter)
    rejected: Counter[str] = field(default_factory=Counter)
    samples: list[tuple[str, Rejected]] = field(default_factory=list)

    @property
    def sizes(self) -> NDArray[np.float64]:
        """All sizes, float64 (n,), in the order read."""
        return np.concatenate(self.chunks) if self.chunks else np.empty(0)

    @property
    def days(self) -> float | None:
        """Days between the first and the last stamp; None without two different stamps."""
        if self.first is None or self.last is None or self.last <= self.first:
            return None
        return (self.last - self.first) / 86_400e9


def read_sizes(files: tuple[str, ...], line_format: LineFormat, on_bytes: Callable[[int], None]) -> Sizes:
    """Read files ('-' is standard input; .gz is unpacked) to their end.

    Parameters: on_bytes, told how many bytes more were read.
    Raises SourceError for a file that cannot be read, ParseSetupError for a header without the column named.
    """
    parser = compile_parser(line_format, compiled=_bytes_of(files) >= LARGE)
    found = Sizes()
    for name in files:
        header: bytes | None = None
        offset = 0
        for block in _blocks(name, found):
            first = header is None
            if header is None:
                header = block.partition(b"\n")[0]
            _take(found, parser, block, name=name, header=header, first=first, offset=offset)
            offset += len(block)
            on_bytes(len(block))
    return found


def _bytes_of(files: tuple[str, ...]) -> int:
    """How large the files are, as far as one can see."""
    return sum(Path(name).stat().st_size for name in files if Path(name).is_file())


def _take(found: Sizes, parser: Parser, block: bytes, *, name: str, header: bytes, first: bool, offset: int) -> None:
    parsed = parser.parse(block, header=header, first=first)
    found.chunks.append(parsed.sizes)
    found.skipped.update(parsed.skipped)
    found.rejected.update(parsed.rejected)
    room = 5 - len(found.samples)
    found.samples += [(f"{name} byte {offset + line.offset}", line) for line in parsed.samples[: max(0, room)]]
    if parsed.stamps is not None and parsed.stamps.size:
        low, high = int(parsed.stamps.min()), int(parsed.stamps.max())
        found.first = low if found.first is None else min(found.first, low)
        found.last = high if found.last is None else max(found.last, high)


def _blocks(name: str, found: Sizes) -> Iterator[bytes]:
    """Blocks of whole lines; a line longer than MAX_LINE is counted and dropped without being held."""
    try:
        with _opened(name) as file:
            rest, skipping = b"", False
            while data := file.read(BLOCK):
                if skipping:
                    _, newline, data = data.partition(b"\n")
                    skipping = not newline
                    if skipping:
                        continue
                data = rest + data
                end = data.rfind(b"\n") + 1
                rest = data[end:]
                if end:
                    yield data[:end]
                if len(rest) > MAX_LINE:
                    found.rejected[OVER_LONG] += 1
                    rest, skipping = b"", True
            if rest:
                yield rest + b"\n"
    except (OSError, EOFError, gzip.BadGzipFile) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise SourceError(f"{name}: cannot be read ({reason}).") from None


def _opened(name: str) -> BinaryIO:
    if name == "-":
        return sys.stdin.buffer
    if name.endswith(".gz"):
        return gzip.open(name, "rb")  # type: ignore[return-value]
    return Path(name).open("rb")
