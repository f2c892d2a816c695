"""Events into panes: what came between two commits, as the additive parts that are stored.

The largest events of a pane are kept by name. To name one costs more than to count it, so an event is described
only when it is among the largest of its pane so far; in panes with few events those are found at the commit, for all
panes at once.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from storage.grid import cell_of, edges
from storage.pane import EMPTY, LARGEST_KEPT, LargeEvent, Pane, counted, rank_of

Describe = Callable[[int], tuple[str, str]]
Counted = tuple[NDArray[np.float64], NDArray[np.int64]]

_MANY = 8 * LARGEST_KEPT  # events at once that are worth a look for the largest among them
_FEWEST_ALONE = 2048  # events that are worth a call of their own
_NOTHING: Counted = (np.empty(0), np.empty(0, np.int64))


@dataclass(frozen=True, slots=True)
class _Able:
    """Events that may be among the largest."""

    sizes: NDArray[np.float64]
    times: NDArray[np.int64]
    describe: Describe


@dataclass(slots=True)
class PaneBuilder:
    """Gathers the events of one pane; `build` makes the additive part of what came since the last `build`.

    The ranks of the largest events are remembered over all parts.
    """

    chunks: list[NDArray[np.float64]] = field(default_factory=list)
    late: int = 0
    bar: float = 0.0
    """Sizes below this cannot be among the largest any more."""
    _able: list[_Able] = field(default_factory=list)
    _events: list[LargeEvent] = field(default_factory=list)
    _top: list[tuple[float, int]] = field(default_factory=list)  # (-size, time) of the largest, in this order

    def add(self, sizes: NDArray[np.float64], times: NDArray[np.int64], late: int, describe: Describe) -> None:
        """Take events in.

        Parameters: sizes float64 (m,); times int64 (m,), effective, ns; late, how many of them were late;
        describe(i) gives (digest, place) of event i, asked for those that are among the largest, at `build` or before.
        """
        self.count(sizes, late)
        self.consider(sizes, times, describe)

    def count(self, sizes: NDArray[np.float64], late: int) -> None:
        """Take events in; those among them that may be the largest are to be brought to `consider`."""
        self.chunks.append(sizes)
        self.late += late

    def consider(self, sizes: NDArray[np.float64], times: NDArray[np.int64], describe: Describe) -> None:
        """Look for the largest among some events. Parameters as of `add`."""
        if sizes.size < _MANY and not self.bar:
            # So far the pane has few events, of which many would be named in vain.
            self._able.append(_Able(sizes, times, describe))
            return
        places: Sequence[int] = range(sizes.size)
        if sizes.size > 2 * LARGEST_KEPT:
            able = _largest(sizes, times, np.zeros(sizes.size, np.int64), 1)
            places, sizes, times = able.tolist(), sizes[able], times[able]
        ranks = list(zip((-sizes).tolist(), times.tolist(), strict=True))
        if ranks and (len(self._top) < LARGEST_KEPT or min(ranks) <= self._top[-1]):
            self._enter(ranks, lambda k: describe(places[k]))

    def _enter(self, ranks: list[tuple[float, int]], describe: Describe) -> None:
        """Describe those among some events that are among the largest so far."""
        if not ranks:
            return
        self._top = sorted([*self._top, *ranks])[:LARGEST_KEPT]
        last = self._top[-1]
        if len(self._top) == LARGEST_KEPT:
            self.bar = -last[0]
        for k, rank in enumerate(ranks):
            if rank <= last:
                digest, place = describe(k)
                self._events.append(LargeEvent(-rank[0], rank[1], digest, place))

    def build(self, distinct: int) -> Pane:
        """The pane of all events taken in since the last time."""
        return build_panes([self], distinct)[0]

    def name(self, ranks: list[tuple[float, int]], describe: Describe) -> tuple[LargeEvent, ...]:
        """The largest events of this part; given are the largest of those that were only remembered."""
        self._enter(ranks, describe)
        able = [event for event in self._events if (-event.size, event.time) <= self._top[-1]]
        self._able, self._events = [], []
        return tuple(sorted(able, key=rank_of)[:LARGEST_KEPT])


def build_panes(builders: Sequence[PaneBuilder], distinct: int) -> list[Pane]:
    """What `build` of each gives, many at once."""
    sizes = [np.concatenate(builder.chunks) if builder.chunks else np.empty(0) for builder in builders]
    few = [i for i, held in enumerate(sizes) if held.size < _FEWEST_ALONE]
    found = [_NOTHING] * len(sizes)
    for i, together in zip(few, _counted_together([sizes[i] for i in few]), strict=True):
        found[i] = together
    for i, held in enumerate(sizes):
        if held.size >= _FEWEST_ALONE:
            held.sort()
            found[i] = _runs(held)
    named = _named_together(builders)
    return [_built(*each, distinct) for each in zip(builders, found, named, strict=True)]


def _counted_together(parts: Sequence[NDArray[np.float64]]) -> list[Counted]:
    """Distinct sizes, ascending, and their counts in each part; by two sorts for all of them."""
    lengths = np.array([part.size for part in parts], np.int64)
    if not lengths.sum():
        return [_NOTHING] * len(parts)
    sizes, owners = np.concatenate(parts), np.repeat(np.arange(lengths.size), lengths)
    order = _by_owner(np.argsort(sizes), owners)
    sizes, owners = sizes[order], owners[order]
    first = np.flatnonzero(np.concatenate(([True], (sizes[1:] != sizes[:-1]) | (owners[1:] != owners[:-1]))))
    counts = np.diff(first, append=sizes.size)
    sizes = sizes[first]
    cuts = np.searchsorted(owners[first], np.arange(lengths.size + 1)).tolist()
    return [(sizes[low:high], counts[low:high]) for low, high in pairwise(cuts)]


def _by_owner(order: NDArray[np.int64], owners: NDArray[np.int64]) -> NDArray[np.int64]:
    """An order sorted by owner, otherwise left as it is."""
    keys = owners[order]
    if keys.size and keys.max() < 1 << 16:
        return order[np.argsort(keys.astype(np.uint16), kind="stable")]  # numbers of two bytes are sorted by counting
    return order[np.argsort(keys, kind="stable")]


def _runs(ordered: NDArray[np.float64]) -> Counted:
    """Distinct values of ascending ones, and their counts."""
    first = np.flatnonzero(np.concatenate(([True], ordered[1:] != ordered[:-1])))
    return ordered[first], np.diff(first, append=ordered.size)


def _named_together(builders: Sequence[PaneBuilder]) -> list[tuple[LargeEvent, ...]]:
    """The events of each builder that are kept by name; found by two sorts for all of them."""
    batches = [(owner, able) for owner, builder in enumerate(builders) for able in builder._able]
    if not batches:
        return [builder.name([], _nothing) for builder in builders]
    sizes = np.concatenate([able.sizes for _, able in batches])
    times = np.concatenate([able.times for _, able in batches])
    lengths = np.array([able.sizes.size for _, able in batches], np.int64)
    owners = np.repeat(np.array([owner for owner, _ in batches], np.int64), lengths)
    kept = _largest(sizes, times, owners, len(builders))
    batch = np.repeat(np.arange(lengths.size), lengths)[kept]
    places = kept - (np.cumsum(lengths) - lengths)[batch]

    def describe(k: int) -> tuple[str, str]:
        _, able = batches[int(batch[k])]
        return able.describe(int(places[k]))

    ranks = list(zip((-sizes[kept]).tolist(), times[kept].tolist(), strict=True))
    cuts = np.searchsorted(owners[kept], np.arange(len(builders) + 1)).tolist()
    return [
        builder.name(ranks[low:high], lambda k, low=low: describe(low + k))  # type: ignore[misc]
        for builder, (low, high) in zip(builders, pairwise(cuts), strict=True)
    ]


def _nothing(k: int) -> tuple[str, str]:
    raise IndexError(k)


def _largest(
    sizes: NDArray[np.float64], times: NDArray[np.int64], owners: NDArray[np.int64], count: int
) -> NDArray[np.int64]:
    """Indices, by owner, of each owner's largest by (size, earlier time), ties with the last one included."""
    order = _by_owner(np.argsort(-sizes), owners)
    firsts = np.searchsorted(owners[order], np.arange(count + 1))
    last = np.minimum(firsts[:-1] + LARGEST_KEPT, firsts[1:]) - 1
    least = np.where(last >= firsts[:-1], sizes[order[np.maximum(last, 0)]], np.inf)
    order = order[sizes[order] >= least[owners[order]]]
    if order.size <= 2 * count * LARGEST_KEPT:
        return order
    # Many events of one size: the earliest of them.
    order = np.lexsort((times, -sizes, owners))
    last = order[np.maximum(last, 0)]
    least, latest = sizes[last], times[last]
    mine = owners[order]
    able = (sizes[order] > least[mine]) | ((sizes[order] == least[mine]) & (times[order] <= latest[mine]))
    return np.asarray(order[able], np.int64)


def _built(builder: PaneBuilder, found: Counted, named: tuple[LargeEvent, ...], distinct: int) -> Pane:
    sizes, counts = found
    if not sizes.size:
        return EMPTY
    late, builder.late, builder.chunks = builder.late, 0, []
    smallest, largest = float(sizes[0]), float(sizes[-1])
    if sizes.size <= distinct:
        return Pane(sizes, counts, None, late, smallest, largest, named)
    cells, counts = counted(cell_of(sizes), counts)
    return Pane(edges(cells), counts, cells, late, smallest, largest, named)
