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

_within = {"nogil": True, "_nrt": False, "error_model": "numpy", "fastmath": False}
_doors = {"no_cpython_wrapper": True, "no_cfunc_wrapper": True}

inner = njit(**_within, **_doors)
"""A loop that only other loops call. Without the doors for Python (it must not be called from there) and without a
place of its own in the cache (its callers have it inside), everything compiles in less time."""

helper = njit(**_within, **_doors, forceinline=True)
"""A few operations that disappear into the loop calling them; not to be called from Python either."""

int64: Any = np.int64
"""A 64-bit integer. A bare 0 or -1 in a call has a type of its own, and a second version would be compiled for it."""
