"""The events of a block by stream and pane."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray


@dataclass(frozen=True, slots=True)
class Groups:
    """Events sorted by stream and pane, within each in the order in which they came; a group goes into one pane.

    order   int64 (k,), the place in the block of each sorted event; None: they came sorted
    firsts  int64 (g,), where each group starts among the sorted events
    sizes   int64 (g,), its number of events
    codes, panes  int64 (g,), its stream and pane
    """

    order: NDArray[np.int64] | None
    firsts: NDArray[np.int64]
    sizes: NDArray[np.int64]
    codes: NDArray[np.int64]
    panes: NDArray[np.int64]


def groups_of(codes: NDArray[np.int32], panes: NDArray[np.int64]) -> Groups:
    """Group k > 0 events by their streams' codes >= 0 and the numbers of their panes."""
    low = int(panes.min())
    span = int(panes.max()) - low + 1
    most = (int(codes.max()) + 1) * span
    if most <= 1 << 16:  # numbers of two bytes are sorted by counting
        keys = (codes * np.int32(span) + (panes - low)).astype(np.uint16)
        ordered = most == 1 or bool((keys[1:] >= keys[:-1]).all())
        order = None if ordered else np.argsort(keys, kind="stable")
        keys = keys if order is None else keys[order]
        firsts = np.concatenate(([0], np.flatnonzero(keys[1:] != keys[:-1]) + 1))
        first_keys = keys[firsts].astype(np.int64)
        return Groups(order, firsts, np.diff(firsts, append=codes.size), first_keys // span, first_keys % span + low)
    order = np.lexsort((panes, codes))
    codes, panes = codes[order], panes[order]
    firsts = np.concatenate(([0], np.flatnonzero((codes[1:] != codes[:-1]) | (panes[1:] != panes[:-1])) + 1))
    return Groups(order, firsts, np.diff(firsts, append=codes.size), codes[firsts].astype(np.int64), panes[firsts])
