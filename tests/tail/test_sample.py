"""A sample counts sizes as numpy's unique does."""

from __future__ import annotations

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from monitor.tail.sample import Sample


@given(st.lists(st.sampled_from([0.1, 0.2, 3.0, 4.5, 1e9]) | st.floats(1e-3, 1e3), max_size=40).map(np.array))
def test_counts_are_those_of_numpy(sizes):
    sample = Sample.of_sizes(sizes)
    values, counts = np.unique(np.asarray(sizes, float), return_counts=True)
    np.testing.assert_array_equal(sample.sizes, values)
    np.testing.assert_array_equal(sample.counts, counts)
    assert sample.counts.dtype == np.int64
    assert sample.n == sizes.size
    assert sample.resolution == "exact"


def test_cells_are_told_by_their_lower_edges():
    sample = Sample.of_cells(np.array([0, 512, 1024]), np.array([5, 2, 1]))
    assert sample.sizes.tolist() == [1.0, 10.0, 100.0]
    assert (sample.n, sample.resolution) == (8, "grid")
