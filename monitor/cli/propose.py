"""`tailgauge propose`: settings for a log that nobody described."""

from __future__ import annotations

import gzip
import sys
from pathlib import Path
from typing import BinaryIO

import click

from monitor.cli.output import json_option, print_json
from monitor.errors import SourceError, UsageError
from monitor.propose import FileSample, Piece, Proposal, propose
from monitor.propose.names import exactly, general_pattern

HEAD = 256 << 10
"""Bytes read from the start of a file."""
SPREAD, PIECES = 64 << 10, 7
"""Bytes of each further piece, and how many, spread evenly up to the end."""
MOST_BYTES = 8 << 20
"""Of all files together; with many files each gets its share."""
MOST_FILES = 64


@click.command("propose")
@click.argument("files", nargs=-1, metavar="FILE...")
@json_option
def propose_command(files: tuple[str, ...], as_json: bool) -> None:
    """Print commented settings for the log in FILE... (- for standard input), guessed from a sample of its lines.

    Every value has its evidence as a comment; what only a person can know is listed as a doubt, not guessed.
    """
    if not files and sys.stdin.isatty():
        raise UsageError("no FILE given, and nothing is piped in. Name the files of one log, or - for standard input.")
    files = files or ("-",)
    if "-" in files and len(files) > 1:
        raise UsageError("- (standard input) cannot be mixed with files: they would be two feeds. Propose for each.")
    proposal = propose(_samples(files), _follow(files))
    if as_json:
        print_json(proposal)
        return
    click.echo(proposal.settings, nl=False)
    _tell(proposal)


def _tell(proposal: Proposal) -> None:
    """What to do next, where the settings themselves go to a file."""
    if sys.stdout.isatty():
        return
    click.echo(f"tailgauge: {len(proposal.doubts)} doubts are listed at the top of the settings.", err=True)
    click.echo(f"tailgauge: next: {proposal.next_commands[0]}", err=True)


def _samples(files: tuple[str, ...]) -> tuple[FileSample, ...]:
    chosen = files if len(files) <= MOST_FILES else files[:: len(files) // MOST_FILES + 1]
    share = min(1.0, MOST_BYTES / (len(chosen) * (HEAD + SPREAD * PIECES)))
    return tuple(_sample(name, int(HEAD * share), int(SPREAD * share)) for name in chosen)


def _sample(name: str, head: int, spread: int) -> FileSample:
    try:
        if name == "-":
            return _from_start(name, sys.stdin.buffer, head)
        path = Path(name)
        if not path.is_file():
            raise SourceError(f"{name}: {'is a folder; name the files in it' if path.is_dir() else 'no such file'}.")
        if name.endswith(".gz"):
            with gzip.open(path, "rb") as packed:
                return _from_start(name, packed, head)  # type: ignore[arg-type]
        with path.open("rb") as file:
            return _from_file(name, file, path.stat().st_size, head, spread)
    except (OSError, EOFError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise SourceError(f"{name}: cannot be read ({reason}).") from None


def _from_start(name: str, file: BinaryIO, head: int) -> FileSample:
    """Only the start: going on in a pipe or a compressed file would mean reading all of it."""
    data = b""
    while len(data) <= head and (more := file.read(head + 1 - len(data))):
        data += more
    whole = len(data) <= head
    return FileSample(name=name, pieces=(_piece(data, 0, whole),), size=len(data) if whole else None)


def _from_file(name: str, file: BinaryIO, size: int, head: int, spread: int) -> FileSample:
    if size <= head + spread * PIECES:
        return FileSample(name=name, pieces=(_piece(file.read(size), 0, True),), size=size)
    pieces = [_piece(file.read(head), 0, False)]
    for i in range(1, PIECES + 1):
        start = head + (size - spread - head) * i // PIECES
        file.seek(start)
        data = file.read(spread)
        cut = data.find(b"\n") + 1  # the first line is probably cut in two
        pieces.append(_piece(data[cut:], start + cut, False))
    return FileSample(name=name, pieces=tuple(piece for piece in pieces if piece.data), size=size)


def _piece(data: bytes, offset: int, whole: bool) -> Piece:
    """Whole lines only; of a whole file the last line counts even without its newline."""
    if whole and data and not data.endswith(b"\n"):
        data += b"\n"
    return Piece(offset=offset, data=data[: data.rfind(b"\n") + 1])


def _follow(files: tuple[str, ...]) -> tuple[str, ...]:
    """Patterns for `follow`: one with stars if the files differ in dates or numbers and it means no other file."""
    if files == ("-",):
        return ()
    names = sorted(set(files))
    pattern = general_pattern(names) if len(names) > 1 else None
    if pattern is not None:
        meant = {str(p) for p in Path("/" if pattern.startswith("/") else ".").glob(pattern.removeprefix("/"))}
        if meant == {str(Path(name)) for name in names}:
            return (pattern,)
    return tuple(exactly(name) for name in names)
