"""Is a store whole? And what two stores must share to count as equal.

The canonical export leaves out wall-clock columns, durations, names of stores and hosts, places, bookmarks and
versions; what is left depends only on the lines that were read and on the settings.
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator

import msgspec

from storage.errors import StoreCorrupt
from storage.facts import ChainState
from storage.history import Reader
from storage.pane import decode, digest
from storage.store import canonical_json
from storage.window import digest_of_panes


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
            yield canonical_json({"open": [pane.stream, pane.start, content.n, digest(content)]})
        for refit in reader.refits():
            kept = msgspec.structs.asdict(refit)
            for key in ("known_at", "seconds", "versions", "attempts"):
                del kept[key]
            yield canonical_json({"refit": kept})
        for baseline in reader.baselines():
            held = msgspec.structs.asdict(baseline)
            del held["known_at"]
            yield canonical_json({"baseline": held})
        for fact in (
            *reader.watches(), *reader.watch_states(), *reader.spoken(), *reader.alarms(), *reader.alarm_moves(),
            *reader.notices(),
        ):  # fmt: skip
            told = msgspec.structs.asdict(fact)
            told.pop("known_at", None)
            yield canonical_json({type(fact).__name__: told})


class Finding(msgspec.Struct, frozen=True, kw_only=True):
    """One thing that was checked: how much was looked at, and every fault found, in words."""

    what: str
    looked_at: int
    faults: tuple[str, ...]


def check(reader: Reader) -> list[Finding]:
    """Everything that can be checked from the store alone, on one state of it."""
    with reader.snapshot():
        return [
            _file(reader),
            _panes(reader),
            _parts(reader),
            _quarantine(reader),
            _chains(reader),
            _totals(reader),
            _refits(reader),
        ]


def _file(reader: Reader) -> Finding:
    rows = [row[0] for row in reader.db.execute("pragma integrity_check").fetchall()]
    return Finding(what="database file", looked_at=1, faults=() if rows == ["ok"] else tuple(rows))


def _panes(reader: Reader) -> Finding:
    """Each sealed pane: checksum, digest, and the columns beside its content."""
    faults, count = [], 0
    for row in reader.db.query("select * from pane order by stream, from_ns"):
        count += 1
        name = f"pane {row['stream']} at {row['from_ns']}"
        try:
            pane = decode(row["content"])
        except StoreCorrupt as error:
            faults.append(f"{name}: {error}")
            continue
        if digest(pane) != row["digest"]:
            faults.append(f"{name}: its content is not the one that was sealed")
        told = (row["events"], row["late"], row["distinct_sizes"], row["resolution"], row["smallest"], row["largest"])
        if told != (pane.n, pane.late, pane.sizes.size, pane.resolution, pane.smallest, pane.largest):
            faults.append(f"{name}: its columns do not match its content")
    return Finding(what="sealed panes", looked_at=count, faults=tuple(faults))


def _parts(reader: Reader) -> Finding:
    faults, count = [], 0
    for row in reader.db.query("select id, stream, from_ns, events, content from pane_part order by id"):
        count += 1
        name = f"part {row['id']} of the open pane {row['stream']} at {row['from_ns']}"
        try:
            if decode(row["content"]).n != row["events"]:
                faults.append(f"{name}: its count does not match its content")
        except StoreCorrupt as error:
            faults.append(f"{name}: {error}")
    return Finding(what="parts of open panes", looked_at=count, faults=tuple(faults))


def _quarantine(reader: Reader) -> Finding:
    """Damaged parts that the daemon set aside: their events are counted, but in no pane."""
    rows = list(reader.db.query("select * from quarantine order by id"))
    return Finding(
        what="damaged parts set aside",
        looked_at=len(rows),
        faults=tuple(f"{row['stream']} at {row['from_ns']}: {row['events']} events: {row['reason']}" for row in rows),
    )


def balance(chain: ChainState) -> int:
    """Lines read that nothing accounts for; 0 in a whole store."""
    waiting = chain.waiting is not None
    return chain.lines - chain.events - waiting - sum(chain.skipped.values()) - sum(chain.rejected.values())


def _chains(reader: Reader) -> Finding:
    """Lines read = events + waiting + skipped + rejected, and a position that can be read."""
    faults = []
    chains = reader.chains()
    for chain in chains:
        if balance(chain):
            faults.append(f"{chain.feed}, {chain.chain}: {balance(chain)} of {chain.lines} lines are not accounted for")
        try:
            msgspec.json.decode(chain.bookmark or "null")
        except msgspec.DecodeError:
            faults.append(f"{chain.feed}, {chain.chain}: its position cannot be read")
    return Finding(what="accounts and positions of chains", looked_at=len(chains), faults=tuple(faults))


def _totals(reader: Reader) -> Finding:
    """Events of the chains = events of the streams = events in panes, for each stream."""
    faults = []
    streams = reader.streams()
    held: Counter[str] = Counter()
    for pane in reader.panes():
        held[pane.stream] += pane.events
    for part in reader.open_panes():
        held[part.stream] += part.events
    for gone in reader.forgotten():
        held[gone.stream] += gone.events
    for stream in streams:
        if held[stream.stream] != stream.events:
            faults.append(f"{stream.stream}: {stream.events} events counted, {held[stream.stream]} in its panes")
    counted = sum(chain.events for chain in reader.chains())
    if counted != sum(stream.events for stream in streams):
        faults.append(f"{counted} events read, {sum(stream.events for stream in streams)} counted in streams")
    return Finding(what="events of streams", looked_at=len(streams), faults=tuple(faults))


def _refits(reader: Reader) -> Finding:
    """Each refit's window still consists of the panes that it was judged on."""
    faults = []
    digests: dict[str, list[tuple[int, int, str]]] = {}
    for pane in reader.panes():
        digests.setdefault(pane.stream, []).append((pane.start, pane.end, pane.digest))
    refits = [refit for refit in reader.refits() if refit.state == "done"]
    for refit in refits:
        inside = [d for start, end, d in digests.get(refit.stream, ()) if start >= refit.start and end <= refit.end]
        if digest_of_panes(inside) != refit.window_digest:
            faults.append(f"refit {refit.id} of {refit.stream}: its panes are not those that it was judged on")
    return Finding(what="windows of refits", looked_at=len(refits), faults=tuple(faults))
