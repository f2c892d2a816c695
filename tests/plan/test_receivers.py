"""[notify.NAME] and [[known]]: what is understood, hours by the wall clock, and each refusal."""

from __future__ import annotations

from datetime import datetime
from zoneinfo import ZoneInfo

import pytest

from monitor.errors import SettingsError
from monitor.plan import CommandWay, Hours, PostWay, Receiver, SyslogWay, read_plan
from monitor.plan.notifying import FACILITIES
from monitor.plan.spans import DAY, SECOND

BASE = """
store = "a.db"
[feed.a]
follow = ["a.jsonl"]
lines = "json"
size = "n"
[watch]
timezone = "Europe/Lisbon"
"""


def receiver(lines: str) -> Receiver:
    return read_plan(f"{BASE}[notify.desk]\n{lines}", "w.toml").receivers[0]


def ns(*when: int, zone: str = "Europe/Lisbon") -> int:
    return round(datetime(*when, tzinfo=ZoneInfo(zone)).timestamp()) * SECOND  # type: ignore[misc, arg-type]


def test_a_command_with_everything_left_out() -> None:
    found = receiver('command = ["./page-the-desk", "--loud"]')
    assert found.way == CommandWay(("./page-the-desk", "--loud"))
    assert found.wants("any stream", "fit")
    assert (found.hours, found.repeat_after, found.false_alarm_every) == (None, None, None)
    assert found.timeout == 30 * SECOND
    assert found.due(5) == 5


def test_streams_rules_and_spans() -> None:
    found = receiver(
        'command = ["x"]\nstreams = ["north-*", "yard"]\nrules = ["level", "no events"]\nrepeat_after = "2h"\n'
        'false_alarm_every = "90d"\ntimeout = "5s"'
    )
    wanted = [("north-dock", "level"), ("yard", "no events"), ("south", "level"), ("north-dock", "fit")]
    assert [found.wants(*one) for one in wanted] == [True, True, False, False]
    assert (found.repeat_after, found.false_alarm_every, found.timeout) == (7200 * SECOND, 90 * DAY, 5 * SECOND)


def test_an_address_to_post_to() -> None:
    address = "https://desk.example.com:8443/alarms?to=ops"
    found = receiver(f'post = "{address}"\nmode = "binary"\nsecret_file = "desk.secret"')
    assert found.way == PostWay(
        address=address, mode="binary", secret_header="Authorization",
        secret_file="desk.secret", certificates=None,
    )  # fmt: skip
    for host in ("127.0.0.1:8080", "localhost", "[::1]:80"):
        assert isinstance(receiver(f'post = "http://{host}/"\nsecret_file = "s"').way, PostWay)


@pytest.mark.parametrize(
    ("address", "expected"),
    [
        ("udp://logs.example.com", ("udp", "logs.example.com", 514)),
        ("tcp://logs.example.com", ("tcp", "logs.example.com", 601)),
        ("tcp://[2001:db8::1]:6514/", ("tcp", "2001:db8::1", 6514)),
        ("unix:///dev/log", ("unix", "/dev/log", 0)),
    ],
)
def test_addresses_of_syslog_receivers(address: str, expected: tuple[str, str, int]) -> None:
    way = receiver(f'syslog = "{address}"\nfacility = "local3"').way
    assert isinstance(way, SyslogWay)
    assert (way.transport, way.host, way.port) == expected
    assert way.facility == 19


def test_facilities_have_the_codes_of_the_standard() -> None:
    # RFC 5424 table 1: 0 kernel, 1 user-level, 3 system daemons, 9 clock daemon (cron), 16 local0, 23 local7.
    assert [FACILITIES[name] for name in ("kern", "user", "daemon", "cron", "local0", "local7")] == [0, 1, 3, 9, 16, 23]


def test_hours_are_of_the_wall_clock_and_say_when_they_next_begin() -> None:
    desk = receiver('command = ["x"]\nhours = "08:00-18:00"\ndays = "mon-fri"')
    friday = ns(2026, 11, 27, 12)
    assert desk.due(friday) == friday
    assert desk.due(ns(2026, 11, 27, 8)) == ns(2026, 11, 27, 8)
    assert desk.due(ns(2026, 11, 27, 7, 59)) == ns(2026, 11, 27, 8)
    assert desk.due(ns(2026, 11, 27, 18)) == ns(2026, 11, 30, 8)
    # Daylight saving time ends on 25 October 2026, a Sunday; eight o'clock stays eight o'clock.
    assert desk.due(ns(2026, 10, 24, 12)) == ns(2026, 10, 26, 8)


def test_nights_belong_to_the_day_on_which_they_begin() -> None:
    night = receiver('command = ["x"]\nhours = "22:00-06:00"\ndays = ["fri"]')
    assert night.due(ns(2026, 11, 28, 3)) == ns(2026, 11, 28, 3)
    assert night.due(ns(2026, 11, 28, 6)) == ns(2026, 12, 4, 22)
    assert night.due(ns(2026, 11, 27, 3)) == ns(2026, 11, 27, 22)


@pytest.mark.parametrize("hour", range(0, 24, 5))
def test_the_whole_day_and_the_whole_week_are_always_open(hour: int) -> None:
    t = ns(2026, 10, 25, hour)
    for lines in ('hours = "00:00-24:00"', 'days = "mon-sun"', 'hours = "06:00-06:00"', 'days = "sat-fri"'):
        assert receiver(f'command = ["x"]\n{lines}').due(t) == t


def test_the_next_moment_lies_within_the_hours() -> None:
    hours = Hours(days=(0, 3), start=1350, end=75, timezone="America/New_York")
    for step in range(8 * 24 * 7):
        t = ns(2026, 3, 5) + step * 600 * SECOND
        due = hours.next_within(t)
        assert due >= t
        assert hours.next_within(due) == due


def test_days_in_every_notation() -> None:
    assert receiver('command = ["x"]\ndays = "sat-mon"').hours.days == (0, 5, 6)  # type: ignore[union-attr]
    assert receiver('command = ["x"]\ndays = ["Mon", "wed-thu"]').hours.days == (0, 2, 3)  # type: ignore[union-attr]


@pytest.mark.parametrize(
    ("lines", "message"),
    [
        ("", "notify.desk: expected exactly one of command, post, syslog; found none."),
        (
            'command = ["x"]\npost = "https://a/"',
            "expected exactly one of command, post, syslog; found command and post",
        ),
        ("command = []", "notify.desk.command: expected a program and its arguments"),
        ('command = "page"', "notify.desk.command: expected `array | null`, got `str`"),
        ('command = ["a\\u0000"]', "notify.desk.command: an argument holds a NUL character"),
        ('comand = ["x"]', 'notify.desk.comand: unknown key. Did you mean "command"?'),
        ('command = ["x"]\nmode = "binary"', "notify.desk.mode: has a meaning for post only"),
        ('command = ["x"]\nfacility = "user"', "notify.desk.facility: has a meaning for syslog only"),
        ('command = ["x"]\nrules = ["tail"]', 'notify.desk.rules: "tail" is none of exponent, tail share'),
        ('command = ["x"]\nrules = []', "notify.desk.rules: the list is empty"),
        ('command = ["x"]\nstreams = []', "notify.desk.streams: expected a pattern"),
        ('command = ["x"]\nhours = "8-18"', 'notify.desk.hours: "8-18" is not such as "08:00-18:00"'),
        ('command = ["x"]\nhours = "24:00-06:00"', 'notify.desk.hours: "24:00-06:00" is not such as'),
        ('command = ["x"]\nhours = "08:60-09:00"', 'notify.desk.hours: "08:60-09:00" is not such as'),
        ('command = ["x"]\ndays = "weekdays"', 'notify.desk.days: "weekdays" is not such as "mon-fri"'),
        ('command = ["x"]\ndays = []', "notify.desk.days: the list is empty"),
        ('command = ["x"]\nrepeat_after = "1s"', 'notify.desk.repeat_after: "1s" is too short; expected at least 1m.'),
        ('command = ["x"]\nfalse_alarm_every = "1h"', "notify.desk.false_alarm_every"),
        ('command = ["x"]\ntimeout = "1h"', 'notify.desk.timeout: "1h" is too long; expected at most 10m.'),
        ('post = "ftp://a/"', 'notify.desk.post: "ftp://a/" is no address such as'),
        ('post = "https://user:pw@a/"', "is no address such as"),
        ('post = "https://a:70000/"', "is no address such as"),
        ('post = "https://a/x y"', "is no address such as"),
        ('post = "https://a/"\nmode = "batch"', 'notify.desk.mode: "batch" is neither "structured" nor "binary"'),
        ('post = "https://a/"\nsecret_header = "X:Y"', 'notify.desk.secret_header: "X:Y" is no name of an HTTP header'),
        ('post = "https://a/"\nsecret_file = ""', "notify.desk.secret_file: expected the path"),
        ('post = "http://a.example/"\nsecret_file = "s"', "would send the secret in clear; expected https"),
        ('syslog = "logs.example.com"', 'notify.desk.syslog: "logs.example.com" is no address such as "udp://'),
        ('syslog = "unix://dev/log"', "is no address such as"),
        ('syslog = "udp://a:0"', "is no address such as"),
        ('syslog = "udp://a"\nfacility = "local9"', 'notify.desk.facility: "local9" is none of kern, user'),
    ],
)
def test_refusals_name_the_key_and_what_was_expected(lines: str, message: str) -> None:
    with pytest.raises(SettingsError) as caught:
        receiver(lines)
    assert str(caught.value).startswith("w.toml: notify.desk")
    assert message in str(caught.value)


def test_a_calendar_file_stands_for_its_events() -> None:
    plan = read_plan(
        f'{BASE}[[known]]\ncalendar = "closures.ics"\nstreams = "north-*"\neffect = "not in baseline"', "w.toml"
    )
    assert plan.known == ()
    assert [(one.path, one.streams, one.effect) for one in plan.calendars] == [
        ("closures.ics", "north-*", "not in baseline")
    ]


@pytest.mark.parametrize(
    ("lines", "message"),
    [
        ('calendar = "a.ics"\nreason = "fair"', "known[0].reason: comes from the calendar's events; leave it out."),
        ('calendar = ""', "known[0].calendar: expected the path"),
        ("from = 2026-11-27\nto = 2026-11-28", "known[0].reason: is missing; or name a calendar file instead."),
        ('reason = "fair"', "known[0].from: is missing"),
    ],
)
def test_what_a_known_change_lacks_is_told(lines: str, message: str) -> None:
    with pytest.raises(SettingsError) as caught:
        read_plan(f"{BASE}[[known]]\n{lines}", "w.toml")
    assert message in str(caught.value)
