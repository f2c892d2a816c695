"""Lines of several kinds in one log: which field tells the lines with a size from the others."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from monitor.parse.lines import Field
from monitor.propose.columns import Column, Table
from monitor.propose.names import called

_MOST_KINDS = 50
_MOST_WANTED = 20


class Condition:
    """Only lines whose field is one of the values have the size."""

    def __init__(self, field: Field, values: tuple[str, ...], evidence: str, rows: NDArray[np.bool_]) -> None:
        self.field, self.values, self.evidence, self.rows = field, values, evidence, rows


def find_condition(table: Table, size: Column) -> Condition | None:
    """The field that decides whether a line has the size, if there is one and it decides every line."""
    has = np.isfinite(size.all_numbers)
    if table.lines not in ("json", "csv", "pairs") or has.mean() > 0.99:
        return None
    for column in table.columns:
        if column is size or column.field is None or not 2 <= len(column.counts) <= _MOST_KINDS:
            continue
        if column.present < table.rows or column.numeric > 0.5:
            continue
        with_size = {t for t, h in zip(column.texts, has, strict=True) if h and t is not None}
        without = {t for t, h in zip(column.texts, has, strict=True) if not h and t is not None}
        if with_size and without and not with_size & without and len(with_size) <= _MOST_WANTED:
            values = tuple(sorted(with_size))
            evidence = (
                f"{called(size.field)} stands on every line with these and on no other ({int(has.sum())} of {has.size})"
            )
            return Condition(column.field, values, evidence, has)
    return None


def selected(table: Table, rows: NDArray[np.bool_]) -> Table:
    """The table with only some of its rows."""
    places = np.flatnonzero(rows).tolist()
    pieces = table.pieces[rows]
    columns = [
        Column(c.field, c.label, [c.texts[i] for i in places], quoted=c.quoted, pieces=pieces) for c in table.columns
    ]
    chosen = Table(table.lines, columns, pieces, table.total - (table.rows - len(places)))
    chosen.delimiter, chosen.header, chosen.pattern = table.delimiter, table.header, table.pattern
    chosen.evidence, chosen.notes = table.evidence, table.notes
    return chosen
