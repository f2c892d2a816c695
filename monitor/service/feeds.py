"""The feeds of a plan as open sources with their parsers: blocks of lines in, stimuli out."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path

import numpy as np

from monitor.engine.stimuli import Arrived, ChainSeen, Lines, RejectedLine
from monitor.errors import SourceError
from monitor.parse import compile_parser
from monitor.parse.lines import ParsedLines, Parser, ParseSetupError
from monitor.plan import FeedPlan
from monitor.service.clock import Clock
from monitor.sources import (
    Answering,
    Feed,
    FollowFiles,
    ListenForBatches,
    ListenForLines,
    ReadStandardInput,
    open_source,
)
from monitor.sources.source import Block, Source
from storage.pane import line_digest

BAD_HEADER = "header lacks a column"


class OpenFeed:
    """One feed: its source, its parser, and what they had to complain about.

    Parameters: base, the folder of the settings file; bookmarks, chain -> where to resume.
    """

    def __init__(self, plan: FeedPlan, base: Path, bookmarks: Mapping[str, str], clock: Clock) -> None:
        self.plan = plan
        self._clock = clock
        self._parser: Parser = compile_parser(plan.format)
        self._source: Source = open_source(_place(plan, base), bookmarks, clock)
        self._answering = self._source if isinstance(self._source, Answering) else None
        self._troubles: list[str] = []
        self.held = 0
        """Bytes of lines given since the caller last set this to 0."""

    def poll(self, limit: int) -> Iterator[Arrived]:
        """New lines, about `limit` bytes at most."""
        for block in self._source.poll(limit):
            yield self._arrived(block)

    def finish(self) -> Iterator[Arrived]:
        """What is left when the ends of the files count as their ends."""
        for block in self._source.finish():
            yield self._arrived(block)

    def seen(self) -> Iterator[ChainSeen]:
        """The chains known now."""
        for status in self._source.chains():
            quiet = None if status.modified is None else self._clock.of_file(status.modified)
            yield ChainSeen(
                feed=self.plan.name, chain=status.name, at_end=status.at_end, quiet_since=quiet, now=self._clock.now()
            )

    def troubles(self) -> list[str]:
        """Sentences about what went wrong since the last call."""
        told, self._troubles = self._troubles, []
        return [f"feed {self.plan.name}: {trouble}" for trouble in (*told, *self._source.troubles())]

    def committed(self, bookmark: str) -> None:
        """A commit holds everything up to this bookmark: those who wait for it are told."""
        if self._answering is not None:
            self._answering.committed(bookmark)

    @property
    def awaited(self) -> bool:
        """Somebody waits for the next commit."""
        return self._answering is not None and self._answering.awaited()

    @property
    def receiving(self) -> bool:
        """More is just coming in, though no line was whole yet."""
        return self._answering is not None and self._answering.receiving()

    def use_compiled_parser(self) -> None:
        """From now on lines are read several times as fast; the worker has compiled what that takes."""
        self._parser = compile_parser(self.plan.format, compiled=True)

    def close(self) -> None:
        """Give back files."""
        self._source.close()

    def _arrived(self, block: Block) -> Arrived:
        parsed = self._parsed(block)
        self.held += len(block.data)
        return Arrived(
            feed=self.plan.name, chain=block.chain, lines=_lines(block, parsed), bookmark=block.bookmark,
            now=self._clock.now(),
        )  # fmt: skip

    def _parsed(self, block: Block) -> ParsedLines:
        try:
            return self._parser.parse(block.data, header=block.header, first=block.first)
        except ParseSetupError as error:
            # One file with another header must not stop the daemon; its lines are counted, not lost from sight.
            self._troubles.append(f"{block.chain}: {error}")
            return _all_rejected(block.data)


def _place(plan: FeedPlan, base: Path) -> Feed:
    listen = plan.listen
    if listen is None:
        return FollowFiles(patterns=plan.follow, base=base) if plan.follow else ReadStandardInput()
    if listen.scheme == "http":
        return ListenForBatches(address=listen.address, host=listen.host, port=listen.port)
    path = str(base / listen.path) if listen.path else ""
    return ListenForLines(address=listen.address, host=listen.host, port=listen.port, path=path)


def _all_rejected(data: bytes) -> ParsedLines:
    count = data.count(b"\n")
    nothing = np.empty(0, np.int64)
    return ParsedLines(
        lines=count, sizes=np.empty(0), stamps=nothing, streams=[], stream_codes=np.empty(0, np.int32), starts=nothing,
        ends=nothing, skipped={}, rejected={BAD_HEADER: count} if count else {}, samples=(),
    )  # fmt: skip


def _lines(block: Block, parsed: ParsedLines) -> Lines:
    """The parsed block as the engine takes it; lines that the source itself refused are accounted here too."""
    rejected = dict(parsed.rejected)
    for reason, count in block.rejected_counts.items():
        rejected[reason] = rejected.get(reason, 0) + count

    def describe(i: int) -> tuple[str, str]:
        start, end = int(parsed.starts[i]), int(parsed.ends[i])
        return line_digest(block.data[start:end]), f"{block.chain} byte {block.offset + start}"

    return Lines(
        count=parsed.lines + sum(block.rejected_counts.values()),
        sizes=parsed.sizes,
        stamps=parsed.stamps,
        names=parsed.streams,
        codes=parsed.stream_codes,
        describe=describe,
        skipped=parsed.skipped,
        rejected=rejected,
        samples=tuple(
            RejectedLine(line.reason, block.offset + line.offset, line.text)
            for line in (*block.rejected, *parsed.samples)
        ),
    )


def must_exist(feeds: list[OpenFeed]) -> None:
    """For `run --finish`: a feed of files that matches none is a mistake, not something to wait for.

    Raises SourceError naming the patterns.
    """
    for feed in feeds:
        if feed.plan.follow and not list(feed.seen()):
            raise SourceError(
                f"feed {feed.plan.name}: no file matches {', '.join(feed.plan.follow)}. Check `follow` in the settings."
            )
