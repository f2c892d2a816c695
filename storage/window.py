"""The sum of a stream's last panes: what one refit judges."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from hashlib import blake2b

from storage.pane import Pane, add


@dataclass(frozen=True, slots=True)
class Window:
    """Panes of one stream between two times, summed.

    start, end  ns since 1970 UTC; a pane belongs when it lies inside [start, end)
    panes       how many panes held events
    content     the sum; on the grid when any pane is, or beyond the window's own limit of distinct sizes
    digest      over the digests of the panes, in time order: names the content without holding it
    """

    start: int
    end: int
    panes: int
    content: Pane
    digest: str


def sum_window(start: int, end: int, panes: Iterable[tuple[str, Pane]], window_distinct: int) -> Window:
    """Sum panes given as (digest, content) in time order; see Window."""
    listed = list(panes)
    name = blake2b("\n".join(digest for digest, _ in listed).encode(), digest_size=16).hexdigest()
    return Window(start, end, len(listed), add((pane for _, pane in listed), window_distinct), name)
