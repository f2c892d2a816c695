"""The sum of a stream's last panes: what one refit judges."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass
from hashlib import blake2b

from storage.facts import StoredPane
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


def digest_of_panes(digests: Iterable[str]) -> str:
    """The name of a window: BLAKE2b (16 bytes, hex) over the digests of its panes in time order."""
    return blake2b("\n".join(digests).encode(), digest_size=16).hexdigest()


def sum_window(start: int, end: int, panes: Iterable[StoredPane], window_distinct: int) -> Window:
    """Sum panes given in time order; see Window."""
    listed = list(panes)
    name = digest_of_panes(pane.digest for pane in listed)
    return Window(start, end, len(listed), add((pane.content for pane in listed), window_distinct), name)
