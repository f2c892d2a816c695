"""[notify.NAME] as written, checked and made a Receiver. Refusals name the key and what was expected."""

from __future__ import annotations

import re
from typing import Any, Literal, NoReturn

import msgspec

from monitor.alarms.priorities import RULES
from monitor.errors import SettingsError
from monitor.plan.checks import quoted, span
from monitor.plan.receivers import CommandWay, Hours, PostWay, Receiver, SyslogWay, Way
from monitor.plan.spans import DAY, SECOND

WEEKDAYS = ("mon", "tue", "wed", "thu", "fri", "sat", "sun")
FACILITIES = {
    name: code
    for code, name in enumerate(
        ("kern", "user", "mail", "daemon", "auth", "syslog", "lpr", "news", "uucp", "cron", "authpriv", "ftp", "ntp",
         "audit", "alert", "clock", *(f"local{n}" for n in range(8)))
    )
}  # fmt: skip
"""Numerical codes of RFC 5424 table 1, by their customary short names."""
LONGEST_TIMEOUT = 600 * SECOND

_HOST = r"(?P<host>\[[0-9A-Fa-f:.%]+\]|[A-Za-z0-9](?:[A-Za-z0-9._-]*[A-Za-z0-9])?)(?::(?P<port>[0-9]{1,5}))?"
_POST = re.compile(rf"(?P<scheme>https?)://{_HOST}(?P<target>[/?][!-~]*)?", flags=re.ASCII)
_SYSLOG = re.compile(rf"(?P<transport>udp|tcp)://{_HOST}/?", flags=re.ASCII)
_LOOPBACK = re.compile(r"localhost|127\.[0-9.]+|\[::1\]")


class NotifyTable(msgspec.Struct, frozen=True, forbid_unknown_fields=True, kw_only=True):
    """[notify.NAME] as written: exactly one of command, post, syslog."""

    command: list[str] | None = None
    post: str | None = None
    mode: str = "structured"
    secret_header: str = "Authorization"
    secret_file: str | None = None
    certificates: str | None = None
    syslog: str | None = None
    facility: str = "daemon"
    streams: str | list[str] = "*"
    rules: list[str] | None = None
    hours: str | None = None
    days: str | list[str] | None = None
    repeat_after: str | None = None
    false_alarm_every: str | None = None
    timeout: str = "30s"


class _Place(msgspec.Struct, frozen=True):
    """Where in which file a table stands."""

    name: str
    path: str

    def refuse(self, key: str, words: str) -> NoReturn:
        raise SettingsError(f"{self.name}: {self.path}{'.' if key else ''}{key}: {words}")

    def span(self, key: str, text: str, low: int) -> int:
        return span(self.name, f"{self.path}.{key}", text, low=low)


def receivers(name: str, tables: dict[str, NotifyTable], timezone: str) -> tuple[Receiver, ...]:
    """The receivers that the settings name, in their order. Raises SettingsError."""
    return tuple(
        _receiver(_Place(name, f"notify.{quoted(key)}"), key, given, timezone) for key, given in tables.items()
    )


def _receiver(place: _Place, key: str, given: NotifyTable, timezone: str) -> Receiver:
    streams = (given.streams,) if isinstance(given.streams, str) else tuple(given.streams)
    if not streams or not all(streams):
        place.refuse("streams", 'expected a pattern of stream names such as "north-*", or a list of them.')
    rules = RULES if given.rules is None else tuple(given.rules)
    for rule in rules:
        if rule not in RULES:
            place.refuse("rules", f'"{rule}" is none of {", ".join(RULES)}.')
    if not rules:
        place.refuse("rules", "the list is empty, so that this receiver would never be told anything. Leave it out.")
    timeout = place.span("timeout", given.timeout, SECOND)
    if timeout > LONGEST_TIMEOUT:
        place.refuse("timeout", f'"{given.timeout}" is too long; expected at most 10m.')
    return Receiver(
        name=key,
        way=_way(place, given),
        streams=streams,
        rules=rules,
        hours=_hours(place, given, timezone),
        repeat_after=None
        if given.repeat_after is None
        else place.span("repeat_after", given.repeat_after, 60 * SECOND),
        false_alarm_every=(
            None if given.false_alarm_every is None else place.span("false_alarm_every", given.false_alarm_every, DAY)
        ),
        timeout=timeout,
    )


_ONLY_FOR = {
    "mode": "post", "secret_header": "post", "secret_file": "post", "certificates": "post", "facility": "syslog",
}  # fmt: skip


def _way(place: _Place, given: NotifyTable) -> Way:
    ways = [key for key in ("command", "post", "syslog") if getattr(given, key) is not None]
    if len(ways) != 1:
        place.refuse("", f"expected exactly one of command, post, syslog; found {' and '.join(ways) or 'none'}.")
    defaults: Any = NotifyTable()
    for key, way in _ONLY_FOR.items():
        if way != ways[0] and getattr(given, key) != getattr(defaults, key):
            place.refuse(key, f"has a meaning for {way} only, and this receiver is told by {ways[0]}.")
    if given.command is not None:
        return _command(place, given.command)
    return _post(place, given, given.post) if given.post is not None else _syslog(place, given, given.syslog or "")


def _command(place: _Place, arguments: list[str]) -> CommandWay:
    if not arguments or not arguments[0].strip():
        place.refuse("command", 'expected a program and its arguments, such as ["./page-the-desk", "--loud"].')
    if any("\0" in argument for argument in arguments):
        place.refuse("command", "an argument holds a NUL character, which no program can be given.")
    return CommandWay(tuple(arguments))


def _post(place: _Place, given: NotifyTable, address: str) -> PostWay:
    found = _POST.fullmatch(address)
    if found is None or not _port_is_fine(found["port"]):
        place.refuse("post", f'"{address}" is no address such as "https://desk.example.com/alarms".')
    if given.mode not in ("structured", "binary"):
        place.refuse(
            "mode", f'"{given.mode}" is neither "structured" nor "binary" (the modes of CloudEvents over HTTP).'
        )
    if not re.fullmatch(r"[!#$%&'*+.^_`|~0-9A-Za-z-]+", given.secret_header):
        place.refuse("secret_header", f'"{given.secret_header}" is no name of an HTTP header.')
    if given.secret_file is not None and not given.secret_file.strip():
        place.refuse("secret_file", "expected the path of a file that holds the header's value.")
    if given.secret_file is not None and found["scheme"] == "http" and not _LOOPBACK.fullmatch(found["host"]):
        place.refuse("post", f'"{address}" would send the secret in clear; expected https.')
    mode: Literal["structured", "binary"] = "binary" if given.mode == "binary" else "structured"
    return PostWay(
        address=address, mode=mode, secret_header=given.secret_header, secret_file=given.secret_file,
        certificates=given.certificates,
    )  # fmt: skip


def _syslog(place: _Place, given: NotifyTable, address: str) -> SyslogWay:
    if given.facility not in FACILITIES:
        place.refuse("facility", f'"{given.facility}" is none of {", ".join(FACILITIES)}.')
    facility = FACILITIES[given.facility]
    if address.startswith("unix:///") and len(address) > len("unix:///"):
        return SyslogWay(transport="unix", host=address.removeprefix("unix://"), port=0, facility=facility)
    found = _SYSLOG.fullmatch(address)
    if found is None or not _port_is_fine(found["port"]):
        place.refuse(
            "syslog", f'"{address}" is no address such as "udp://logs.example.com:514", "tcp://...", "unix:///dev/log".'
        )
    transport: Literal["udp", "tcp"] = "udp" if found["transport"] == "udp" else "tcp"
    # 514 is the registered UDP port (RFC 5426); for TCP 601 is (RFC 6587).
    port = int(found["port"]) if found["port"] else {"udp": 514, "tcp": 601}[transport]
    return SyslogWay(transport=transport, host=found["host"].strip("[]"), port=port, facility=facility)


def _port_is_fine(port: str | None) -> bool:
    return port is None or 1 <= int(port) <= 65_535


def _hours(place: _Place, given: NotifyTable, timezone: str) -> Hours | None:
    if given.hours is None and given.days is None:
        return None
    text = given.hours if given.hours is not None else "00:00-24:00"
    found = re.fullmatch(r"\s*(\d\d):(\d\d)\s*-\s*(\d\d):(\d\d)\s*", text, flags=re.ASCII)
    minutes = [60 * int(found[n]) + int(found[n + 1]) for n in (1, 3)] if found else []
    if found is None or max(minutes) > 1440 or minutes[0] == 1440 or int(found[2]) > 59 or int(found[4]) > 59:
        place.refuse("hours", f'"{text}" is not such as "08:00-18:00" (or "22:00-06:00" for nights).')
    return Hours(days=_days(place, given.days), start=minutes[0], end=minutes[1] % 1440, timezone=timezone)


def _days(place: _Place, given: str | list[str] | None) -> tuple[int, ...]:
    if given is None:
        return tuple(range(7))
    out: set[int] = set()
    for part in [given] if isinstance(given, str) else given:
        first, dash, last = (piece.strip().lower() for piece in part.partition("-"))
        if first not in WEEKDAYS or (dash and last not in WEEKDAYS):
            place.refuse("days", f'"{part}" is not such as "mon-fri" or ["mon", "wed"].')
        start = WEEKDAYS.index(first)
        length = (WEEKDAYS.index(last) - start) % 7 if dash else 0
        out |= {(start + n) % 7 for n in range(length + 1)}
    if not out:
        place.refuse("days", "the list is empty, so that this receiver would never be told anything. Leave it out.")
    return tuple(sorted(out))
