"""From the description of lines to what reads them."""

from __future__ import annotations

import math
import zoneinfo

from monitor import rejects as why
from monitor.parse import csv_lines
from monitor.parse.blocks import BOM, CODE, Findings, assemble, cut, mark_unreadable
from monitor.parse.csv_lines import CsvReader
from monitor.parse.free_lines import CombinedReader, PairsReader, PatternReader
from monitor.parse.json_lines import JsonReader
from monitor.parse.lines import Field, FormatError, LineFormat, ParsedLines, Parser
from monitor.parse.text_lines import NumberReader, TextReader
from monitor.rejects import Rejected

_Reader = JsonReader | TextReader
_TEXT: dict[str, type[CombinedReader | PairsReader | PatternReader]] = {
    "combined": CombinedReader,
    "pairs": PairsReader,
    "pattern": PatternReader,
}


def compile_parser(format: LineFormat, *, compiled: bool = False) -> Parser:  # noqa: A002 - the word that users see
    """Make a parser of lines.

    Parameters: compiled, use a compiled reader where there is one for the format. It gives the same, several times
    as fast, but its first use on a machine takes seconds (see warm_parsers).
    Raises FormatError (a SettingsError) for a description that cannot work; the message starts with the key.
    """
    _check(format)
    if format.lines == "csv":
        csv_lines.check(format)
        return _CsvParser(format, compiled=compiled)
    reader = _reader(format)
    plain = _OneParser(format, reader)
    return _compiled(format, plain, reader) or plain if compiled else plain


def _compiled(format_: LineFormat, plain: Parser, reader: _Reader) -> Parser | None:
    """The compiled parser of a format, None when there is none."""
    from monitor.parse import desks  # late: it loads the compiler
    from monitor.parse.compiled import CompiledParser

    if isinstance(reader, JsonReader):
        desk = desks.json_desk(format_)
    elif isinstance(reader, PairsReader):
        desk = desks.pairs_desk(format_)
    elif isinstance(reader, CombinedReader):
        desk = desks.combined_desk(format_)
    else:
        return None
    return None if desk is None else CompiledParser(format_, desk, plain, reader)


def warm_parsers() -> None:
    """Compile the compiled readers, or load them from the cache on disk, so that no later block waits for that."""
    format_ = LineFormat(lines="json", size="size", time="time", stream=("stream",))
    line = b'{"size":1.5,"time":"2026-12-01T00:00:00Z","stream":"\xc3\xa6"}\n'
    compile_parser(format_, compiled=True).parse(line * 200)


class _OneParser:
    """Lines whose fields stand in known places."""

    def __init__(self, format_: LineFormat, reader: _Reader, *, has_header: bool = False) -> None:
        self._format, self._reader, self._has_header = format_, reader, has_header

    def parse(self, block: bytes, *, header: bytes | None = None, first: bool = False) -> ParsedLines:
        return _parse(self._format, self._reader, block, first=first, skip_first=first and self._has_header)


class _CsvParser:
    """CSV: the header of the file decides where the columns are."""

    def __init__(self, format_: LineFormat, *, compiled: bool) -> None:
        self._format, self._compiled = format_, compiled
        self._named = csv_lines.has_header(format_)
        self._known: tuple[bytes | None, Parser] | None = None

    def parse(self, block: bytes, *, header: bytes | None = None, first: bool = False) -> ParsedLines:
        if first and header is None:
            header = block[: block.find(b"\n")]
        if self._known is None or (self._named and self._known[0] != header):
            if not block:
                return _parse(self._format, NumberReader(self._format), b"", first=False, skip_first=False)
            self._known = (header, self._of_columns(*csv_lines.columns_of(self._format, header)))
        return self._known[1].parse(block, first=first)

    def _of_columns(self, columns: dict[Field, int], width: int | None) -> Parser:
        reader = CsvReader(self._format, columns, width)
        plain = _OneParser(self._format, reader, has_header=self._named)
        if not self._compiled:
            return plain
        from monitor.parse import desks  # late: it loads the compiler
        from monitor.parse.compiled import CompiledParser

        desk = desks.csv_desk(self._format, columns, width)
        return plain if desk is None else CompiledParser(self._format, desk, plain, reader, has_header=self._named)


def _parse(format_: LineFormat, reader: _Reader, block: bytes, *, first: bool, skip_first: bool) -> ParsedLines:
    marked = len(BOM) if first and block.startswith(BOM) else 0
    lines = cut(block[marked:] if marked else block)
    found = Findings.of(lines.ends.size)
    mark_unreadable(lines, found)
    if skip_first and lines.ends.size:
        found.verdict[0] = CODE[why.HEADER]
    reader.read(lines, found)
    has_time, has_stream = format_.time is not None, bool(format_.stream)
    parsed = assemble(lines, found, scale=format_.scale, has_time=has_time, has_stream=has_stream)
    return _shifted(parsed, marked) if marked else parsed


def _shifted(parsed: ParsedLines, by: int) -> ParsedLines:
    """Offsets with the byte order mark counted; the mark belongs to the first line."""
    starts = parsed.starts + by
    starts[starts == by] = 0
    samples = tuple(Rejected(s.reason, s.offset + by if s.offset else 0, s.text) for s in parsed.samples)
    return ParsedLines(
        parsed.lines, parsed.sizes, parsed.stamps, parsed.streams, parsed.stream_codes, starts,
        parsed.ends + by, parsed.skipped, parsed.rejected, samples,
    )  # fmt: skip


def _check(format_: LineFormat) -> None:
    if not (math.isfinite(format_.scale) and format_.scale > 0):
        raise FormatError(f"scale: {format_.scale!r} is no factor; give a number above 0")
    try:
        zoneinfo.ZoneInfo(format_.timezone)
    except (zoneinfo.ZoneInfoNotFoundError, ValueError, OSError):
        raise FormatError(f'timezone: {format_.timezone!r} is not known; give a name such as "Europe/Lisbon"') from None
    for field, values in format_.where:
        if not values:
            raise FormatError(f"where: {field!r} may have no value at all, so no line could ever match")


def _reader(format_: LineFormat) -> _Reader:
    if format_.lines == "json":
        return JsonReader(format_)
    if format_.lines in _TEXT:
        return _TEXT[format_.lines](format_)
    if format_.lines == "number":
        for key in ("size", "time", "stream", "where"):
            if getattr(format_, key) not in (None, ()):
                raise FormatError(f'{key}: a line of lines = "number" is one number and has no fields')
        return NumberReader(format_)
    raise FormatError(f"lines: {format_.lines!r} is not known")
