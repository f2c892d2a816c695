"""How every loop is compiled: one place for the flags that results depend on.

No fast-math anywhere: without it the compiler may neither reorder sums nor fuse a product with a sum, so that
the same numbers come out on every processor, for every number of threads and for every width of vector unit.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from numba import njit

# Without numba's reference counting (_nrt): a loop borrows its caller's arrays and makes none of its own, so there is
# nothing to count; counting them at every call made scans three times slower. Arrays come from Python.
kernel = njit(nogil=True, cache=True, _nrt=False, error_model="numpy", fastmath=False)
"""A loop called from Python or large enough to stand alone; compiled once and cached on disk."""

helper = njit(nogil=True, forceinline=True, _nrt=False, error_model="numpy", fastmath=False)
"""A few operations that disappear into the kernel calling them."""

int64: Any = np.int64
"""A 64-bit integer. A bare 0 or -1 in a call has a type of its own, and a second version would be compiled for it."""
