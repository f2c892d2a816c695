"""What `screen` and `history` share: records decoded with the store's name in their errors, streams and times named."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from datetime import UTC, date, datetime
from pathlib import Path
from zoneinfo import ZoneInfo

import msgspec

from monitor.alarms.alarm import Alarm
from monitor.errors import DataError, SourceError, UsageError
from monitor.render.safe import plain
from monitor.render.seen import Refit, WatchSeen, decode_refit
from monitor.watch.dependence import Ground
from monitor.watch.rules import Reading, Watch
from storage.facts import AlarmStood, RefitStored, WatchBegun, WatchStood


@contextmanager
def named_damage(what: str, path: Path) -> Iterator[None]:
    """Turns what cannot be decoded into a DataError that names the store and the record."""
    try:
        yield
    except msgspec.DecodeError as error:
        raise DataError(
            f"{path}: {plain(what)} cannot be read ({plain(str(error))}). "
            "The store was changed by something else, or by another version."
        ) from None


def decoded(stored: RefitStored, path: Path) -> Refit:
    """The refit, decoded. Raises DataError naming the store and the refit when it holds something else."""
    with named_damage(f"refit {stored.id}", path):
        return decode_refit(stored)


def decoded_alarm(stood: AlarmStood, path: Path) -> Alarm:
    """The alarm as it stands. Raises DataError."""
    with named_damage(f"alarm {stood.id}", path):
        return msgspec.json.decode(stood.alarm, type=Alarm)


def begun_watch(begun: WatchBegun, path: Path) -> WatchSeen:
    """A watch before its first slot. Raises DataError."""
    with named_damage(f"watch {begun.id}", path):
        return WatchSeen(
            watch=msgspec.json.decode(begun.watch, type=Watch),
            ground=msgspec.json.decode(begun.ground or "null", type=Ground | None),
            since=begun.effective_from,
            at=begun.effective_from,
            readings=(),
        )


def standing_watch(begun: WatchSeen, stood: WatchStood, path: Path) -> WatchSeen:
    """The same watch with what its rules read last. Raises DataError."""
    with named_damage(f"readings of {stood.stream}", path):
        readings = msgspec.json.decode(stood.readings, type=tuple[Reading, ...])
    return msgspec.structs.replace(begun, at=stood.at, readings=readings)


def unknown_stream(name: str, known: Iterable[str]) -> SourceError:
    """The error for a stream that the store does not hold, naming some that it does."""
    names = [plain(other) for other in known]
    shown = ", ".join(names[:8]) + (" and more" if len(names) > 8 else "")
    return SourceError(f'no stream "{plain(name)}" in this store; it holds: {shown or "none yet"}.')


def moment(text: str | None, zone: str, *, last: bool = False) -> int | None:
    """A time from the command line in ns since 1970 UTC; None for None.

    Without a zone it is local time of the plan; a bare date is its first moment, with `last` its last.
    Raises UsageError.
    """
    if text is None:
        return None
    try:
        day = date.fromisoformat(text) if len(text) <= 10 else None
        when = datetime.fromisoformat(text)
        if day is not None and last:
            when = when.replace(hour=23, minute=59, second=59, microsecond=999_999)
        if when.tzinfo is None:
            when = when.replace(tzinfo=ZoneInfo(zone))
        since = when.astimezone(UTC) - datetime(1970, 1, 1, tzinfo=UTC)
    except (ValueError, OverflowError):
        raise UsageError(
            f'"{plain(text)}" is no time; expected such as 2026-12-01T14:05:00Z, "2026-12-01 14:05" or 2026-12-01.'
        ) from None
    return (since.days * 86_400 + since.seconds) * 1_000_000_000 + since.microseconds * 1000
