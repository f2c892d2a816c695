"""Fields of the sampled lines as columns, and what can be said of their values."""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Sequence
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from monitor.parse.lines import Field
from monitor.parse.text_lines import number

_CAMEL = re.compile(r"(?<=[a-z0-9])(?=[A-Z])")
_NO_WORD = re.compile(r"[^a-z0-9]+")


class Column:
    """One field over the rows of a table.

    Parameters: field as the settings name it (None: the line itself); label, the words that describe it;
    texts, one a row, None where missing; quoted, its values are JSON strings; pieces, of each row.
    """

    def __init__(
        self, field: Field | None, label: str, texts: Sequence[str | None], *, quoted: bool, pieces: NDArray[np.int64]
    ) -> None:
        self.field, self.label, self.quoted = field, label, quoted
        self.texts = [None if t is None or not t.strip() else t.strip(" \t") for t in texts]
        self._pieces = pieces

    @cached_property
    def words(self) -> frozenset[str]:
        """The words of the label in lower case: placedAt, placed_at and placed.at give the same."""
        return frozenset(w for w in _NO_WORD.split(_CAMEL.sub(" ", self.label).lower()) if w)

    @cached_property
    def present(self) -> int:
        """Rows that have it."""
        return sum(t is not None for t in self.texts)

    @cached_property
    def counts(self) -> Counter[str]:
        """How often each value occurs."""
        return Counter(t for t in self.texts if t is not None)

    @cached_property
    def all_numbers(self) -> NDArray[np.float64]:
        """float64 (rows,), NaN where there is no finite number."""
        values = (number(t) if t is not None else None for t in self.texts)
        found = np.array([np.nan if v is None else v for v in values], np.float64)
        found[~np.isfinite(found)] = np.nan
        return found

    @cached_property
    def numbers(self) -> NDArray[np.float64]:
        """The finite numbers, in row order."""
        return self.all_numbers[np.isfinite(self.all_numbers)]

    @property
    def numeric(self) -> float:
        """Share of its values that are numbers."""
        return self.numbers.size / self.present if self.present else 0.0

    @cached_property
    def positive(self) -> NDArray[np.float64]:
        """The numbers above zero, sorted."""
        return np.sort(self.numbers[self.numbers > 0])

    @cached_property
    def whole(self) -> bool:
        """All its numbers are whole."""
        return bool(self.numbers.size) and bool((self.numbers == np.rint(self.numbers)).all())

    def steps(self, values: NDArray[np.float64] | NDArray[np.int64]) -> NDArray[np.float64]:
        """Differences of neighbouring rows (rows of different pieces are no neighbours); NaN left out."""
        steps: NDArray[np.float64] = np.diff(values.astype(np.float64))
        chosen: NDArray[np.float64] = steps[(np.diff(self._pieces) == 0) & np.isfinite(steps)]
        return chosen


class Table:
    """The lines of one format, understood.

    rows, total  lines understood; lines looked at
    notes        doubts that arose while reading
    """

    def __init__(self, lines: str, columns: Sequence[Column], pieces: NDArray[np.int64], total: int) -> None:
        self.lines, self.columns, self.pieces, self.total = lines, tuple(columns), pieces, total
        self.rows = int(pieces.size)
        self.delimiter = ","
        self.header: bool | None = None
        self.pattern: str | None = None
        self.evidence = ""
        self.notes: list[str] = []

    @property
    def share(self) -> float:
        """Share of the lines that were understood."""
        return self.rows / self.total if self.total else 0.0
