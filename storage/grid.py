"""The fixed geometric grid that crowded panes are rounded onto: 512 cells per factor of ten.

A cell is a function of the size alone, never of settings or neighbours, so that panes rounded at
different times, on different machines, add up exactly. Cell k holds the sizes with
edge(k) <= size < edge(k + 1), where edge(k) is the double nearest to 10^(k/512). The edges come from
decimal arithmetic and the correctly rounded conversion of text to double, and a size is placed by
comparing it with them: the logarithms of two libraries may differ in the last bit, comparisons do not.
"""

from __future__ import annotations

from decimal import Context, Decimal
from functools import cache
from math import log

import numpy as np
from numpy.typing import NDArray

CELLS_PER_DECADE = 512
CELL_WIDTH = log(10.0) / CELLS_PER_DECADE
"""Width of a cell in ln(size)."""

# Doubles span 4.9e-324 .. 1.8e308; the lowest decade is cut at the smallest normal double.
_LOWEST_DECADE = -308
LOWEST_CELL = _LOWEST_DECADE * CELLS_PER_DECADE
HIGHEST_CELL = 157_826
"""The cell of the largest double: floor(512 log10(1.797...e308))."""


@cache
def _mantissas() -> tuple[str, ...]:
    """10^(j/512) for j = 0..511 to 50 digits."""
    context = Context(prec=50)
    return tuple(str(context.power(Decimal(10), context.divide(Decimal(j), Decimal(CELLS_PER_DECADE))))
                 for j in range(CELLS_PER_DECADE))  # fmt: skip


@cache
def _decade(exponent: int) -> NDArray[np.float64]:
    """The 512 edges of one factor of ten, and the first of the next."""
    edges = [float(f"{mantissa}e{exponent}") for mantissa in _mantissas()]
    edges.append(float(f"1e{exponent + 1}"))
    table = np.array(edges)
    table.flags.writeable = False
    return table


def edges(cells: NDArray[np.int64]) -> NDArray[np.float64]:
    """Lower edges of `cells`.

    Parameters: cells, int64 (n,), within LOWEST_CELL..HIGHEST_CELL + 1.
    Returns float64 (n,), in the unit of the sizes; the edge above the highest cell is infinite.
    """
    cells = np.asarray(cells, np.int64)
    decades, places = np.divmod(cells, CELLS_PER_DECADE)
    out = np.empty(cells.shape)
    for exponent in np.unique(decades):
        here = decades == exponent
        out[here] = _decade(int(exponent))[places[here]]
    return out


def cell_of(sizes: NDArray[np.float64]) -> NDArray[np.int64]:
    """The cell of each size.

    Parameters: sizes, float64 (n,), positive and finite. Sizes below the smallest normal double
    (2.2e-308, which no measurement reaches) fall into the lowest cell.
    Returns int64 (n,).
    """
    sizes = np.maximum(np.asarray(sizes, np.float64), 1e-308)
    # The logarithm proposes a cell, at most one off; the table of edges decides.
    guess = np.floor(np.log10(sizes) * CELLS_PER_DECADE).astype(np.int64)
    guess = np.clip(guess, LOWEST_CELL, HIGHEST_CELL)
    decades, places = np.divmod(guess, CELLS_PER_DECADE)
    step = np.zeros(sizes.shape, np.int64)
    for exponent in np.unique(decades):
        here = decades == exponent
        table = _decade(int(exponent))
        step[here] = (sizes[here] >= table[places[here] + 1]).astype(np.int64) - (sizes[here] < table[places[here]])
    cells: NDArray[np.int64] = np.clip(guess + step, LOWEST_CELL, HIGHEST_CELL)
    return cells
