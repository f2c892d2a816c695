"""Drawings out of terminal cells: one tail on logarithmic axes, and a strip of the last refits.

The drawing reads without colour: data are dots, the fit is a row of plus signs, the baseline a row of
small letters, the limit an upright line. Where the fit runs through the data only the data is seen, and
that is the good news: marks beside the data are where the fit departs from it.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from math import ceil, floor, log10

import numpy as np
from numpy.typing import NDArray

from monitor.render.numbers import at_place, count_text, size_text
from monitor.render.planned import survival
from monitor.render.safe import padded, plain, shorten
from monitor.render.seen import Refit
from monitor.tail.tails import Tails

Floats = NDArray[np.float64]

# Dots of a braille cell, by row from the top and column from the left (Unicode block 2800).
_DOTS = ((0x01, 0x08), (0x02, 0x10), (0x04, 0x20), (0x40, 0x80))
_ASCII_DATA = "#"
FIT_MARK, BASELINE_MARK, LIMIT_MARK = "+", "b", "|"
LEFT = 12
"""Cells left of the drawing, for the shares."""
LEAST_WIDTH, LEAST_HEIGHT = LEFT + 16, 5


@dataclass(frozen=True, slots=True, kw_only=True)
class TailDrawing:
    """What is drawn of one stream.

    sizes   float64 (k,), distinct, ascending, > 0
    counts  int64 (k,), events at each size
    """

    sizes: Floats
    counts: NDArray[np.int64]
    unit: str
    fit: Tails | None
    baseline: Tails | None
    limit: float | None


@dataclass(frozen=True, slots=True)
class _Axes:
    """Logarithmic axes: decades, and cells for them."""

    left: float
    right: float
    bottom: float
    columns: int
    rows: int

    def column(self, size: Floats, per_cell: int = 1) -> Floats:
        """Place across, in parts of a cell."""
        return (np.log10(size) - self.left) / (self.right - self.left) * (self.columns * per_cell - 1)

    def row(self, share: Floats, per_cell: int = 1) -> Floats:
        """Place down, in parts of a cell; a share of 1 is at the top."""
        return np.log10(share) / self.bottom * (self.rows * per_cell - 1)


def tail_chart(drawing: TailDrawing, width: int, height: int, *, ascii_only: bool) -> list[str]:
    """The tail on logarithmic axes: share of events at or above each size, in exactly `height` lines.

    No line is wider than `width` cells. Empty when there is no room for a drawing, or nothing to draw.
    """
    if width < LEAST_WIDTH or height < LEAST_HEIGHT or not drawing.sizes.size:
        return []
    axes = _axes(drawing, width - LEFT, height - 2)
    cells = _data_cells(drawing, axes, ascii_only)
    layers = [(drawing.fit, FIT_MARK), (drawing.baseline, BASELINE_MARK)]
    for tails, mark in layers:
        if tails is not None:
            _draw_tails(cells, tails, axes, mark)
    if drawing.limit is not None:
        _draw_limit(cells, drawing.limit, axes)
    lines = [_row_label(row, axes) + "".join(cells[row]).rstrip() for row in range(axes.rows)]
    return [shorten(line.rstrip(), width) for line in [*lines, *_size_axis(axes, drawing.unit, ascii_only)]]


def _axes(drawing: TailDrawing, columns: int, rows: int) -> _Axes:
    """Axes that hold the data, the start of every tail and the limit."""
    ends = [float(drawing.sizes[0]), float(drawing.sizes[-1])]
    starts = [float(tails.xmin[0]) for tails in (drawing.fit, drawing.baseline) if tails is not None]
    top = max([*ends, *starts, *([drawing.limit] if drawing.limit else [])])
    # The body below the tail is of little interest: one decade of it is enough.
    low = max(ends[0], min([ends[1] / 10, *(start / 10 for start in starts)])) if starts else ends[0]
    left, right = floor(log10(low) * 4) / 4, log10(top) + 0.05
    bottom = -max(1.0, log10(float(drawing.counts.sum())))
    return _Axes(left, max(right, left + 0.5), bottom, columns, rows)


def _data_cells(drawing: TailDrawing, axes: _Axes, ascii_only: bool) -> list[list[str]]:
    """The data's steps as dots: for every dot column the span of shares that the curve runs through there."""
    share = drawing.counts[::-1].cumsum()[::-1] / drawing.counts.sum()
    across, down = (1, 1) if ascii_only else (2, 4)
    dots = np.zeros((axes.rows * down, axes.columns * across), bool)
    edges = 10 ** np.linspace(axes.left, axes.right, dots.shape[1] + 1)
    at = np.searchsorted(drawing.sizes, edges, "left")
    for column in range(dots.shape[1]):
        if at[column] >= share.size:
            break
        upper = share[at[column]]
        lower = share[min(at[column + 1], share.size - 1)]
        places = np.rint(axes.row(np.array([upper, lower]), down)).astype(int)
        dots[max(0, places[0]) : places[1] + 1, column] = True
    if ascii_only:
        return [[_ASCII_DATA if dot else " " for dot in row] for row in dots]
    return [
        [_braille(dots[4 * r : 4 * r + 4, 2 * c : 2 * c + 2]) for c in range(axes.columns)] for r in range(axes.rows)
    ]


def _braille(dots: NDArray[np.bool_]) -> str:
    code = sum(_DOTS[r][c] for r in range(4) for c in range(2) if dots[r, c])
    return chr(0x2800 + code) if code else " "


def _draw_tails(cells: list[list[str]], tails: Tails, axes: _Axes, mark: str) -> None:
    sizes = 10 ** np.linspace(axes.left, axes.right, axes.columns)
    share = survival(tails, sizes)
    for column in np.flatnonzero(np.isfinite(share) & (share > 0)):
        row = round(float(axes.row(share[column : column + 1])[0]))
        if 0 <= row < axes.rows and cells[row][column] == " ":
            cells[row][column] = mark


def _draw_limit(cells: list[list[str]], limit: float, axes: _Axes) -> None:
    column = round(float(axes.column(np.array([limit]))[0]))
    if 0 <= column < axes.columns:
        for row in cells:
            if row[column] == " ":
                row[column] = LIMIT_MARK
        label = f"limit {size_text(limit)} "
        start = column - len(label)
        if start >= 0 and all(cell == " " for cell in cells[0][start:column]):
            cells[0][start:column] = label


def _row_label(row: int, axes: _Axes) -> str:
    """'1 in 100 ' beside the row in which that share lies, else blank."""
    here = [k for k in range(int(-axes.bottom) + 1) if round(float(axes.row(np.array([10.0**-k]))[0])) == row]
    if not here:
        return " " * LEFT
    text = "all" if here[0] == 0 else f"1 in {_short(10 ** here[0])}"
    return padded(text, LEFT - 1, right=True) + " "


def _short(number: int) -> str:
    return count_text(number) if number < 1e5 else f"1e{round(log10(number))}"


def _size_axis(axes: _Axes, unit: str, ascii_only: bool) -> list[str]:
    """The line under the drawing with a mark at each power of ten, and the sizes under it."""
    flat, tick = ("-", "+") if ascii_only else ("─", "┴")
    line, labels = [flat] * axes.columns, [" "] * axes.columns
    free = 0
    for decade in range(ceil(axes.left - 1e-9), floor(axes.right) + 1):
        column = round(float(axes.column(np.array([10.0**decade]))[0]))
        line[column] = tick
        text = _size_label(decade)
        start = max(0, min(column - len(text) // 2, axes.columns - len(text)))
        if start >= free and start + len(text) <= axes.columns:
            labels[start : start + len(text)] = text
            free = start + len(text) + 2
    name = padded(plain(unit, ascii_only), LEFT - 1, right=True)
    return [" " * LEFT + "".join(line), f"{name} {''.join(labels)}"]


def _size_label(decade: int) -> str:
    return at_place(10.0**decade, min(decade, 0)) if -5 < decade < 7 else f"1e{decade}"


def chart_legend(drawing: TailDrawing, *, ascii_only: bool) -> str:
    """What the marks of the drawing mean, in one line."""
    parts = [f"{_ASCII_DATA if ascii_only else 'dots'} data"]
    parts += [f"{FIT_MARK} fit"] if drawing.fit is not None else []
    parts += [f"{BASELINE_MARK} baseline"] if drawing.baseline is not None else []
    parts += [f"{LIMIT_MARK} limit"] if drawing.limit is not None else []
    return f"Share of events at or above a size: {', '.join(parts)}"


def refit_letter(refit: Refit) -> str:
    """One letter for what a refit said; the help names them."""
    if refit.state == "failed":
        return "x"
    if refit.state == "skipped":
        return "-"
    if refit.judgement is None or refit.judgement.alpha is None:
        return "."
    flag = refit.exponent_flag
    if flag is not None:
        return "L" if flag.direction == "lighter" else "H"
    return "M" if refit.fit_flag is not None else "="


STRIP_LETTERS: tuple[tuple[str, str], ...] = (
    ("=", "as the baseline"),
    ("H", "heavier"),
    ("L", "lighter"),
    ("M", "misfit (power law doubtful or ruled out)"),
    (".", "no tail"),
    ("x", "failed"),
    ("-", "skipped"),
)


def refit_strip(refits: Sequence[Refit], width: int) -> str:
    """The last refits, one letter each, the newest at the right end."""
    return "".join(refit_letter(refit) for refit in refits[-width:]) if width > 0 else ""
