"""Who is told of alarms: by which way, of which streams and rules, at which hours. Spans and times are ns."""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from fnmatch import fnmatchcase
from typing import Literal
from zoneinfo import ZoneInfo

import msgspec

from monitor.plan.spans import SECOND

_EPOCH = datetime(1970, 1, 1, tzinfo=UTC)


class CommandWay(msgspec.Struct, frozen=True, tag="command"):
    """A program of the user's, given the notice on its standard input; never through a shell."""

    arguments: tuple[str, ...]


class PostWay(msgspec.Struct, frozen=True, kw_only=True, tag="post"):
    """An HTTP POST. The secret file, if any, holds the value of the secret header; it is read for each notice."""

    address: str
    mode: Literal["structured", "binary"]
    secret_header: str
    secret_file: str | None
    certificates: str | None
    """File of certificates to trust instead of the system's."""


class SyslogWay(msgspec.Struct, frozen=True, kw_only=True, tag="syslog"):
    """A syslog receiver: transport, and host and port, or for "unix" the path of its socket."""

    transport: Literal["udp", "tcp", "unix"]
    host: str
    port: int
    facility: int


Way = CommandWay | PostWay | SyslogWay


class Hours(msgspec.Struct, frozen=True, kw_only=True):
    """When a receiver wants to be told: from `start` to `end` (minutes after midnight, local) on days that begin so.

    An end at or before the start is on the next day: 22:00-06:00 is a night, 00:00-00:00 the whole day.
    """

    days: tuple[int, ...]
    """0 is Monday."""
    start: int
    end: int
    timezone: str

    def _spans(self, t: int) -> list[tuple[int, int]]:
        """The open spans (ns) that begin on the days around t, in order."""
        zone = ZoneInfo(self.timezone)
        local = (_EPOCH + timedelta(seconds=t // SECOND)).astimezone(zone)
        midnight = local.replace(hour=0, minute=0, second=0, fold=0, tzinfo=None)
        length = (self.end - self.start) % 1440 or 1440
        found = []
        for offset in range(-2, 9):
            day = midnight + timedelta(days=offset)
            if day.weekday() in self.days:
                begin = day + timedelta(minutes=self.start)
                found.append((_moment(begin, zone), _moment(begin + timedelta(minutes=length), zone)))
        return found

    def next_within(self, t: int) -> int:
        """t itself when it lies inside the hours, else the moment they next begin."""
        spans = self._spans(t)
        if any(start <= t < end for start, end in spans):
            return t
        return min(start for start, _ in spans if start > t)


def _moment(wall: datetime, zone: ZoneInfo) -> int:
    since = wall.replace(tzinfo=zone).astimezone(UTC) - _EPOCH
    return (since.days * 86_400 + since.seconds) * SECOND


class Receiver(msgspec.Struct, frozen=True, kw_only=True):
    """One receiver of notices.

    repeat_after       an alarm that nobody acknowledges is told again after so long; None: told once
    false_alarm_every  the budget that this receiver grants to all streams and rules together; None: that of [watch]
    """

    name: str
    way: Way
    streams: tuple[str, ...]
    rules: tuple[str, ...]
    hours: Hours | None
    repeat_after: int | None
    false_alarm_every: int | None
    timeout: int

    def wants(self, stream: str, rule: str) -> bool:
        """Is it told of this stream and rule?"""
        return rule in self.rules and any(fnmatchcase(stream, pattern) for pattern in self.streams)

    def due(self, t: int) -> int:
        """When a notice made at t may be given to it."""
        return t if self.hours is None else self.hours.next_within(t)
