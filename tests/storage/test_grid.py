"""The grid against exact arithmetic: mpmath at 60 digits decides what the edges must be."""

from __future__ import annotations

import mpmath
import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from storage.grid import CELLS_PER_DECADE, HIGHEST_CELL, LOWEST_CELL, cell_of, edges


def test_edges_are_the_doubles_nearest_to_the_exact_powers() -> None:
    # Reference: mpmath 60 digits, rounded once to double.
    cells = np.array([-150_001, -5_003, -512, -1, 0, 1, 7, 255, 511, 512, 100_003, 157_000])
    with mpmath.workdps(60):
        exact = [float(mpmath.mpf(10) ** (mpmath.mpf(int(k)) / CELLS_PER_DECADE)) for k in cells]
    assert edges(cells).tolist() == exact


@given(st.lists(st.floats(min_value=2.3e-308, max_value=1.7e308), min_size=1, max_size=50))
def test_a_size_lies_between_the_edges_of_its_cell(sizes: list[float]) -> None:
    x = np.array(sizes)
    cells = cell_of(x)
    assert (edges(cells) <= x).all()
    below_top = cells < HIGHEST_CELL
    assert (x[below_top] < edges(cells[below_top] + 1)).all()


@given(st.integers(LOWEST_CELL + CELLS_PER_DECADE, HIGHEST_CELL))
def test_an_edge_belongs_to_the_cell_above_it_and_its_neighbour_below_to_the_one_below(cell: int) -> None:
    edge = edges(np.array([cell]))
    assert cell_of(edge)[0] == cell
    assert cell_of(np.nextafter(edge, 0.0))[0] == cell - 1


def test_whole_sizes_below_222_have_cells_of_their_own() -> None:
    # 512 log10((n + 1) / n) >= 1 exactly for n <= 221.
    cells = cell_of(np.arange(1.0, 223.0))
    assert (np.diff(cells) >= 1).all()
    assert (np.diff(cell_of(np.arange(300.0, 400.0))) == 0).any()


def test_the_extremes_of_doubles_have_cells() -> None:
    assert cell_of(np.array([5e-324, 1.7976931348623157e308])).tolist() == [LOWEST_CELL, HIGHEST_CELL]
    with mpmath.workdps(60):
        assert int(mpmath.floor(CELLS_PER_DECADE * mpmath.log10(mpmath.mpf(1.7976931348623157e308)))) == HIGHEST_CELL
