"""The canonical export: what two stores must share to count as equal.

It leaves out wall-clock columns, durations, names of stores and hosts, places, bookmarks and versions; what
is left depends only on the lines that were read and on the settings.
"""

from __future__ import annotations

from collections.abc import Iterator

import msgspec

from storage import pane as panes
from storage.history import Reader
from storage.store import canonical_json


def canonical_lines(reader: Reader) -> Iterator[str]:
    """The store as lines of JSON in a fixed order; equal stores give equal lines."""
    with reader.snapshot():
        for stream in reader.streams():
            yield canonical_json({"stream": msgspec.structs.asdict(stream)})
        for chain in reader.chains():
            known = msgspec.structs.asdict(chain)
            del known["bookmark"], known["idle"]
            yield canonical_json({"chain": known})
        for row in reader.panes():
            yield canonical_json({"pane": msgspec.structs.asdict(row)})
        for pane in reader.open_panes():
            content = reader.open_content(pane.stream, pane.start)
            yield canonical_json({"open": [pane.stream, pane.start, content.n, panes.digest(content)]})
        for refit in reader.refits():
            kept = msgspec.structs.asdict(refit)
            for key in ("known_at", "seconds", "versions", "attempts"):
                del kept[key]
            yield canonical_json({"refit": kept})
        for baseline in reader.baselines():
            held = msgspec.structs.asdict(baseline)
            del held["known_at"]
            yield canonical_json({"baseline": held})
