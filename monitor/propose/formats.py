"""Which of the six formats the lines are of; tried in an order in which a mistake is least likely."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Callable, Sequence

import msgspec
import numpy as np

from monitor.parse import csv_lines
from monitor.parse.free_lines import COMBINED_PARTS, CombinedReader, split_pairs
from monitor.parse.json_lines import DEEPEST, depth
from monitor.parse.lines import Field, LineFormat
from monitor.parse.stamps import NO_STAMP, StampReader
from monitor.parse.text_lines import number
from monitor.propose.columns import Column, Table
from monitor.propose.samples import Line

MOST_COLUMNS = 200
_ENOUGH = 0.8
_DELIMITERS = {",": "commas", ";": "semicolons", "\t": "tabs", "|": "vertical bars", " ": "single spaces"}
_WEB_PARTS = (*COMBINED_PARTS, "method", "path", "protocol")
_WEB_LABELS = {"host": "client user", "request": "request message", "agent": "user agent"}
_PAIR_KEY = re.compile(r'[^ \t="]+')

Row = dict[Field, tuple[str | None, str | None, bool]]
"""Field -> text, label, whether it is a JSON string."""


def json_table(lines: Sequence[Line]) -> Table | None:
    """JSON objects, one a line."""
    table = _table("json", lines, _json_row)
    if table is None:
        return None
    fields = [str(c.field) for c in table.columns]
    # A field that is now a value and now an object cannot be named together with what is inside it.
    columns = [c for c in table.columns if not any(f.startswith(f"{c.field}.") for f in fields)]
    plain = Table("json", columns, table.pieces, table.total)
    plain.evidence = _share_words(plain, "are JSON objects")
    return plain


def _json_row(text: str) -> Row | None:
    raw = text.encode()
    try:
        if raw.count(b"[") + raw.count(b"{") > DEEPEST and depth(raw) > DEEPEST:
            return None
        value = msgspec.json.decode(raw)
    except (msgspec.DecodeError, UnicodeDecodeError, RecursionError):
        return None
    if not isinstance(value, dict):
        return None
    row: Row = {}
    _flatten(value, (), row)
    return row


def _flatten(value: dict[str, object], path: tuple[str, ...], row: Row) -> None:
    for name, inner in value.items():
        if not name or len(row) >= MOST_COLUMNS or not _storable(name):
            continue
        here = (*path, name)
        if isinstance(inner, dict):
            if len(here) < 6:
                _flatten(inner, here, row)
        elif not isinstance(inner, list):
            field = ".".join(part.replace(".", "\\.") for part in here)
            text = None if inner is None else str(inner).lower() if isinstance(inner, bool) else str(inner)
            row[field] = (text, " ".join(here[-2:]), isinstance(inner, str))


def _storable(name: str) -> bool:
    """Names that the daemon's reader of JSON cannot be told to look for are left out."""
    return not any(c in '"\\' or c < " " or "\ud800" <= c <= "\udfff" for c in name)


def combined_table(lines: Sequence[Line]) -> Table | None:
    """Web-server lines."""
    reader = CombinedReader(LineFormat(lines="combined", size="bytes", stream=_WEB_PARTS))

    def row(text: str) -> Row | None:
        picked = reader.pick(text)
        if isinstance(picked, str):
            return None
        parts = zip(_WEB_PARTS, picked[1:], strict=True)
        return {part: (t, _WEB_LABELS.get(part, part), False) for part, t in parts}

    table = _table("combined", lines, row)
    if table is not None:
        table.evidence = _share_words(table, "have the fields of a web-server log")
    return table


def number_table(lines: Sequence[Line]) -> Table | None:
    """One number a line."""

    def row(text: str) -> Row | None:
        return {"": (text, "", False)} if number(text.strip(" \t")) is not None else None

    table = _table("number", lines, row)
    if table is None:
        return None
    held = Column(None, "", table.columns[0].texts, quoted=False, pieces=table.pieces)
    made = Table("number", [held], table.pieces, table.total)
    made.evidence = _share_words(made, "are one number each")
    return made


def pairs_table(lines: Sequence[Line]) -> Table | None:
    """key=value pairs, at least two a line and half of its words."""

    def row(text: str) -> Row | None:
        pairs = split_pairs(text)
        if not pairs or len(pairs) < 2 or 2 * len(pairs) < len(text.split()) - text.count('"'):
            return None
        keys = [key for key in pairs if _PAIR_KEY.fullmatch(key)][:MOST_COLUMNS]
        return {key: (pairs[key], key, False) for key in keys}

    table = _table("pairs", lines, row)
    if table is None or not _has_numbers(table):
        return None
    table.evidence = _share_words(table, "are key=value pairs")
    return table


def csv_table(lines: Sequence[Line], delimiters: str = ",;\t|") -> Table | None:
    """Columns between one of the delimiters, the same number on nearly every line."""
    best: tuple[float, int, str] | None = None
    for delimiter in delimiters:
        widths = Counter(len(c) for line in lines if (c := csv_lines.split(line.text, delimiter)) is not None)
        if not widths:
            continue
        width, count = widths.most_common(1)[0]
        share = count / len(lines)
        if width >= 2 and share >= _ENOUGH and (best is None or (share, width) > best[:2]):
            best = (share, width, delimiter)
    if best is None:
        return None
    table = _csv_columns(lines, best[2], best[1])
    if table is None or not _has_numbers(table):
        return None
    return table


def _csv_columns(lines: Sequence[Line], delimiter: str, width: int) -> Table | None:
    split = [(line, csv_lines.split(line.text, delimiter)) for line in lines]
    heads = [cells for line, cells in split if line.first and cells is not None]
    body = [(line, cells) for line, cells in split if cells is not None and len(cells) == width and not line.first]
    headed = bool(heads) and all(_is_header(cells, body) for cells in heads)
    if not headed:
        body = [(line, cells) for line, cells in split if cells is not None and len(cells) == width]
    if not body:
        return None
    names = [name.strip(" \t") for name in heads[0]] if headed else []
    pieces = np.array([line.piece for line, _ in body], np.int64)
    columns = []
    for i in range(min(width, MOST_COLUMNS)):
        named = headed and i < len(names) and names[i] and names.count(names[i]) == 1
        field: Field = names[i] if named else i + 1
        label = names[i] if headed and i < len(names) else ""
        columns.append(Column(field, label, [cells[i] for _, cells in body], quoted=False, pieces=pieces))
    table = Table("csv", columns, pieces, len(lines) - (len(heads) if headed else 0))
    table.delimiter, table.header = delimiter, headed
    table.evidence = f"{_share_words(table, f'have {width} columns between {_DELIMITERS[delimiter]}')}; " + (
        "the first line names them" if headed else "no line names them: columns are numbered from 1"
    )
    if headed and len({tuple(cells) for cells in heads}) > 1:
        table.notes.append("the files' header lines differ; a file that lacks a named column is rejected whole")
    return table


def _is_header(cells: list[str], body: Sequence[tuple[Line, list[str]]]) -> bool:
    """Names, not values: no number or time among them, and numbers or times below some of them."""
    stamps = StampReader()

    def is_value(text: str) -> bool:
        text = text.strip(" \t")
        return number(text) is not None or stamps.text(text) != NO_STAMP

    if any(is_value(cell) for cell in cells) or not any(cell.strip() for cell in cells):
        return False
    below = [c for _, c in body[:200]]
    places = range(min(len(cells), len(below[0]) if below else 0))
    return any(2 * sum(is_value(c[i]) for c in below) > len(below) for i in places)


def _has_numbers(table: Table) -> bool:
    return any(c.numeric >= _ENOUGH and c.present >= 0.3 * table.rows for c in table.columns)


def _table(kind: str, lines: Sequence[Line], read: Callable[[str], Row | None]) -> Table | None:
    """Read every line; None when too few are of the kind. Fields in the order of their first appearance."""
    probe = lines[:: max(1, len(lines) // 200)]
    if sum(read(line.text) is not None for line in probe) < 0.5 * len(probe):
        return None
    read_lines = [(line.piece, row) for line in lines if (row := read(line.text)) is not None]
    if len(read_lines) < _ENOUGH * len(lines):
        return None
    pieces = np.array([piece for piece, _ in read_lines], np.int64)
    fields: dict[Field, str] = {}
    for _, row in read_lines:
        for field, (_, label, _) in row.items():
            if len(fields) < MOST_COLUMNS:
                fields.setdefault(field, label or "")
    columns = []
    for field, label in fields.items():
        cells = [row.get(field, (None, None, False)) for _, row in read_lines]
        quoted = sum(c[2] for c in cells) > 0.1 * sum(c[0] is not None for c in cells)
        columns.append(Column(field, label, [c[0] for c in cells], quoted=quoted, pieces=pieces))
    return Table(kind, columns, pieces, len(lines))


def _share_words(table: Table, what: str) -> str:
    if table.rows == table.total:
        return f"all {table.total} lines looked at {what}"
    return f"{table.rows} of {table.total} lines looked at {what}"
