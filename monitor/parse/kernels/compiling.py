"""How every loop over bytes is compiled."""

from __future__ import annotations

from numba import njit

kernel = njit(nogil=True, cache=True, _nrt=False, error_model="numpy")
"""A loop called from Python; compiled once and cached on disk, with all that it calls."""

part = njit(nogil=True, _nrt=False, error_model="numpy")
"""Large enough to stand alone, but called by kernels only."""

helper = njit(nogil=True, forceinline=True, _nrt=False, error_model="numpy")
"""A few operations that disappear into the kernel calling them."""
