"""iCalendar: the examples of RFC 5545, what real calendars hold, and every refusal in words.

Occurrences of the repetition examples: RFC 5545 section 3.8.5.3 [dates from memory, each confirmed by dateutil.rrule,
a second implementation of the same rules].
"""

from __future__ import annotations

from datetime import UTC, datetime, timedelta
from zoneinfo import ZoneInfo

import pytest
from dateutil.rrule import rrulestr
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.alarms.calendar import Calendar, Reading, read_calendar
from monitor.alarms.calendar_text import components, content_line, plain_text, text_list, unfolded

NEW_YORK = ZoneInfo("America/New_York")


def ns(*when: int, zone: str = "UTC") -> int:
    return round(datetime(*when, tzinfo=ZoneInfo(zone)).timestamp()) * 1_000_000_000  # type: ignore[misc, arg-type]


def read(*lines: str, zone: str = "UTC", end: int = ns(2100, 1, 1)) -> Calendar:
    text = "\r\n".join(["BEGIN:VCALENDAR", "VERSION:2.0", "PRODID:-//example//EN", *lines, "END:VCALENDAR", ""])
    return read_calendar(text, Reading(timezone=zone, start=0, end=end))


def event(*lines: str, zone: str = "UTC", end: int = ns(2100, 1, 1)) -> Calendar:
    return read(
        "BEGIN:VEVENT", "UID:1@example.com", "DTSTAMP:19970714T170000Z", *lines, "END:VEVENT", zone=zone, end=end
    )


def spans(calendar: Calendar) -> list[tuple[int, int]]:
    assert calendar.refused == ()
    return [(one.start, one.end) for one in calendar.known]


def days(calendar: Calendar) -> list[str]:
    assert calendar.refused == ()
    return [f"{datetime.fromtimestamp(one.start / 1e9, NEW_YORK):%m%d %H:%M}" for one in calendar.known]


def test_the_bastille_day_party_of_the_standard() -> None:
    # RFC 5545 section 4, first example [from memory].
    found = event("DTSTART:19970714T170000Z", "DTEND:19970715T035959Z", "SUMMARY:Bastille Day Party")
    assert spans(found) == [(ns(1997, 7, 14, 17), ns(1997, 7, 15, 3, 59, 59))]
    assert found.known[0].reason == "Bastille Day Party"
    assert (found.known[0].effect, found.known[0].streams) == ("hold notices", "*")


@pytest.mark.parametrize(
    ("start", "rule", "expected"),
    [
        ("19970902T090000", "FREQ=DAILY;COUNT=10", [f"09{day:02}" for day in range(2, 12)]),
        ("19970902T090000", "FREQ=DAILY;INTERVAL=10;COUNT=5", ["0902", "0912", "0922", "1002", "1012"]),
        ("19970902T090000", "FREQ=WEEKLY;COUNT=10",
         ["0902", "0909", "0916", "0923", "0930", "1007", "1014", "1021", "1028", "1104"]),
        ("19970902T090000", "FREQ=WEEKLY;UNTIL=19971007T000000Z;WKST=SU;BYDAY=TU,TH",
         ["0902", "0904", "0909", "0911", "0916", "0918", "0923", "0925", "0930", "1002"]),
        ("19970901T090000", "FREQ=WEEKLY;INTERVAL=2;UNTIL=19971224T000000Z;WKST=SU;BYDAY=MO,WE,FR",
         ["0901", "0903", "0905", "0915", "0917", "0919", "0929", "1001", "1003", "1013", "1015", "1017", "1027",
          "1029", "1031", "1110", "1112", "1114", "1124", "1126", "1128", "1208", "1210", "1212", "1222"]),
        ("19970902T090000", "FREQ=WEEKLY;INTERVAL=2;COUNT=8;WKST=SU;BYDAY=TU,TH",
         ["0902", "0904", "0916", "0918", "0930", "1002", "1014", "1016"]),
        ("19970805T090000", "FREQ=WEEKLY;INTERVAL=2;COUNT=4;BYDAY=TU,SU;WKST=MO", ["0805", "0810", "0819", "0824"]),
        ("19970805T090000", "FREQ=WEEKLY;INTERVAL=2;COUNT=4;BYDAY=TU,SU;WKST=SU", ["0805", "0817", "0819", "0831"]),
    ],
)  # fmt: skip
def test_the_standard_s_own_repetitions(start: str, rule: str, expected: list[str]) -> None:
    found = event(f"DTSTART;TZID=America/New_York:{start}", "DURATION:PT1H", f"RRULE:{rule}")
    # Nine o'clock stays nine o'clock when daylight saving time ends on 26 October.
    assert days(found) == [f"{day} 09:00" for day in expected]


def test_daily_until_christmas_eve_has_113_days() -> None:
    found = event(
        "DTSTART;TZID=America/New_York:19970902T090000", "DURATION:PT1H", "RRULE:FREQ=DAILY;UNTIL=19971224T000000Z"
    )
    assert len(found.known) == 113
    assert days(found)[-1] == "1223 09:00"


@settings(max_examples=150, deadline=None, derandomize=True)
@given(
    first=st.datetimes(datetime(1996, 1, 1), datetime(1998, 1, 1)).map(lambda t: t.replace(microsecond=0)),  # noqa: DTZ001
    weekly=st.booleans(),
    interval=st.integers(1, 5),
    count=st.integers(1, 30),
    byday=st.sets(st.sampled_from(["MO", "TU", "WE", "TH", "FR", "SA", "SU"])),
    week_starts=st.sampled_from(["MO", "SU", "TH"]),
)
def test_repetitions_agree_with_a_second_implementation(
    first: datetime, weekly: bool, interval: int, count: int, byday: set[str], week_starts: str
) -> None:
    if byday:
        byday.add(["MO", "TU", "WE", "TH", "FR", "SA", "SU"][first.weekday()])  # there dtstart counts only if it fits
    rule = f"FREQ={'WEEKLY' if weekly else 'DAILY'};INTERVAL={interval};COUNT={count};WKST={week_starts}"
    rule += f";BYDAY={','.join(sorted(byday))}" if byday and weekly else ""
    found = event(f"DTSTART:{first:%Y%m%dT%H%M%S}", "DURATION:PT1H", f"RRULE:{rule}")
    expected = [round(one.replace(tzinfo=UTC).timestamp()) * 10**9 for one in rrulestr(rule, dtstart=first)]
    assert [start for start, _ in spans(found)] == expected


def test_a_repetition_without_end_goes_to_the_horizon() -> None:
    found = event("DTSTART:20261101T090000Z", "DURATION:PT1H", "RRULE:FREQ=DAILY", end=ns(2026, 11, 4, 9))
    assert [start for start, _ in spans(found)] == [ns(2026, 11, day, 9) for day in (1, 2, 3)]


def test_whole_days_are_days_of_the_zone_of_the_settings() -> None:
    one = event("DTSTART;VALUE=DATE:20261127", zone="Europe/Lisbon")
    assert spans(one) == [(ns(2026, 11, 27), ns(2026, 11, 28))]
    longer = event("DTSTART;VALUE=DATE:20261024", "DTEND;VALUE=DATE:20261026", zone="Europe/Berlin")
    assert spans(longer) == [(ns(2026, 10, 24, zone="Europe/Berlin"), ns(2026, 10, 26, zone="Europe/Berlin"))]
    assert longer.known[0].end - longer.known[0].start == 49 * 3600 * 10**9  # the night that has an hour more


def test_times_that_do_not_exist_or_exist_twice() -> None:
    # RFC 5545 section 3.3.5: 2007-03-11 02:30 in New York is read as EST, hence 03:30 EDT; 2007-11-04 01:30 as EDT.
    gap = event("DTSTART;TZID=America/New_York:20070311T023000", "DURATION:PT1H")
    assert gap.known[0].start == ns(2007, 3, 11, 7, 30)
    twice = event("DTSTART;TZID=America/New_York:20071104T013000", "DURATION:PT1H")
    assert twice.known[0].start == ns(2007, 11, 4, 5, 30)


def test_durations_of_days_go_by_the_wall_clock_and_hours_are_exact() -> None:
    start = "DTSTART;TZID=Europe/Berlin:20261024T120000"
    a_day, hours = event(start, "DURATION:P1D"), event(start, "DURATION:PT24H")
    assert a_day.known[0].end - a_day.known[0].start == 25 * 3600 * 10**9
    assert hours.known[0].end - hours.known[0].start == 24 * 3600 * 10**9
    # 15 days, 5 hours, 20 seconds: the example of section 3.3.6.
    assert spans(event("DTSTART:20260101T000000Z", "DURATION:P15DT5H0M20S"))[0][1] == ns(2026, 1, 16, 5, 0, 20)
    assert spans(event("DTSTART:20260101T000000Z", "DURATION:P7W"))[0][1] == ns(2026, 2, 19)


def test_dates_left_out_moved_and_cancelled() -> None:
    series = (
        "BEGIN:VEVENT", "UID:7", "DTSTART:20261101T090000Z", "DURATION:PT1H", "RRULE:FREQ=DAILY;COUNT=5",
        "EXDATE:20261102T090000Z,20261103T090000Z", "END:VEVENT",
    )  # fmt: skip
    moved = (
        "BEGIN:VEVENT", "UID:7", "RECURRENCE-ID:20261104T090000Z", "DTSTART:20261104T150000Z", "DURATION:PT1H",
        "END:VEVENT",
    )  # fmt: skip
    called_off = (
        "BEGIN:VEVENT", "UID:7", "RECURRENCE-ID:20261105T090000Z", "DTSTART:20261105T090000Z", "DURATION:PT1H",
        "STATUS:CANCELLED", "END:VEVENT",
    )  # fmt: skip
    found = read(*series, *moved, *called_off)
    assert [start for start, _ in spans(found)] == [ns(2026, 11, 1, 9), ns(2026, 11, 4, 15)]


def test_text_is_unfolded_and_unescaped() -> None:
    # RFC 5545 section 3.1: "This is a lo / ng description / that exists on a long line."
    folded = "DESCRIPTION:This is a lo\r\n ng description\r\n  that exists on a long line."
    assert unfolded(folded) == [(1, "DESCRIPTION:This is a long description that exists on a long line.")]
    assert plain_text(r"Project XYZ Final Review\nConference Room - 3B\, Level 1\; \\ end") == (
        "Project XYZ Final Review\nConference Room - 3B, Level 1; \\ end"
    )
    assert text_list(r"a\,b, HOLD NOTICES") == ["a,b", "HOLD NOTICES"]
    assert event("DTSTART:20261127T090000Z", "DURATION:PT1H", r"SUMMARY:Fair\, hall 3\nand 4").known[0].reason == (
        "Fair, hall 3 and 4"
    )


def test_quoted_parameters_may_hold_what_would_end_them() -> None:
    found = content_line('ATTENDEE;CN="Doe: Jane; QA";ROLE=CHAIR:mailto:jane@example.com', 3)
    assert found.parameters == {"CN": "Doe: Jane; QA", "ROLE": "CHAIR"}
    assert found.value == "mailto:jane@example.com"


def test_categories_choose_the_effect() -> None:
    found = event("DTSTART:20261127T090000Z", "DURATION:PT1H", "CATEGORIES:Sales,New baseline after")
    assert found.known[0].effect == "new baseline after"


def test_an_alarm_inside_an_event_does_not_disturb_it() -> None:
    found = event(
        "DTSTART:20261127T090000Z", "DURATION:PT1H", "BEGIN:VALARM", "TRIGGER:-PT15M", "DURATION:P9D", "END:VALARM"
    )
    assert spans(found) == [(ns(2026, 11, 27, 9), ns(2026, 11, 27, 10))]
    assert [one.name for one in components("BEGIN:VCALENDAR\nBEGIN:A\nEND:A\nEND:VCALENDAR")] == ["A", "VCALENDAR"]


HOUR = "DURATION:PT1H"


@pytest.mark.parametrize(
    ("lines", "words"),
    [
        (["DTSTART:tomorrow", HOUR], 'line 7: DTSTART "tomorrow" is neither a date (20261127) nor a time'),
        (["DTSTART:20260231", HOUR], 'line 7: DTSTART "20260231" is no real time'),
        (["DTSTART:19000101", HOUR], "outside the years 1970 to 2199"),
        (["DTSTART;TZID=Customized Zone:20260301T090000", HOUR], 'the time zone "Customized Zone", which is no IANA'),
        ([HOUR], "line 4: the event has no DTSTART"),
        (["DTSTART:20260301T090000Z"], "line 4: the event has no end (DTEND or DURATION)"),
        (["DTSTART:20260301T090000Z", "DTEND:20260301T090000Z"], "line 8: DTEND is not after DTSTART"),
        (["DTSTART:20260301", "DURATION:-P1D"], 'line 8: DURATION "-P1D" is not such as P1D'),
        (["DTSTART:20260301", "DURATION:PT0S"], 'DURATION "PT0S" is nothing'),
        (["DTSTART:20260301", "RRULE:FREQ=MONTHLY;BYDAY=-1FR"], "only FREQ=DAILY and FREQ=WEEKLY"),
        (["DTSTART:20260301", "RRULE:FREQ=DAILY;BYDAY=MO"], "only FREQ=DAILY and FREQ=WEEKLY"),
        (["DTSTART:20260301", "RRULE:FREQ=WEEKLY;BYDAY=1MO"], "are not such as BYDAY=MO,FR"),
        (["DTSTART:20260301", "RRULE:FREQ=DAILY;COUNT=0"], "COUNT=0 of the repetition is no whole number"),
        (["DTSTART:20260301", "RRULE:FREQ=DAILY;INTERVAL=x"], "INTERVAL=X of the repetition"),
        (["DTSTART:20260301", "RRULE:FREQ=DAILY;UNTIL=never"], '"NEVER" is neither a date'),
        (["DTSTART:20260301", "RDATE:20260401"], "RDATE is not understood"),
        (["DTSTART:20260301", "RECURRENCE-ID;RANGE=THISANDFUTURE:20260301"], "all following occurrences"),
    ],
)
def test_an_event_that_is_not_understood_is_refused_in_words_and_the_others_taken(lines: list[str], words: str) -> None:
    good = ("BEGIN:VEVENT", "DTSTART:20260501", "END:VEVENT")
    found = read("BEGIN:VEVENT", "UID:x", "SUMMARY:bad", *lines, "END:VEVENT", *good)
    assert len(found.known) == 1
    assert len(found.refused) == 1
    assert words in found.refused[0]
    assert found.refused[0].endswith(".")


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "line 1: expected BEGIN:VCALENDAR"),
        ("<html>", "line 1: not a line of a calendar"),
        ("SUMMARY:x", "line 1: expected BEGIN:VCALENDAR"),
        ("BEGIN:VCALENDAR\nBEGIN:VEVENT\nDTSTART:20260301", "line 2: BEGIN:VEVENT is never closed"),
        ("BEGIN:VCALENDAR\nBEGIN:VEVENT\nEND:VCALENDAR", "END:VCALENDAR closes BEGIN:VEVENT of line 2"),
        ("BEGIN:VCALENDAR\nSUMMARY\nEND:VCALENDAR", "line 2: SUMMARY has no value"),
    ],
)
def test_a_text_that_is_no_calendar_is_told_so(text: str, words: str) -> None:
    found = read_calendar(text, Reading(timezone="UTC", start=0, end=1))
    assert found.known == ()
    assert words in found.refused[0]


LINES = st.sampled_from(
    ["BEGIN:VEVENT", "END:VEVENT", "END:VCALENDAR", "DTSTART:20260301", "DTSTART;TZID=x:1", "RRULE:FREQ=DAILY;COUNT=3",
     "RRULE:FREQ=WEEKLY;INTERVAL=99999", "DURATION:P9W", "EXDATE:", "EXDATE:20260301,", " x", "UID:1",
     "RECURRENCE-ID:1"]
)  # fmt: skip


@settings(max_examples=200, deadline=None, derandomize=True)
@given(st.lists(LINES | st.text(max_size=12), max_size=12))
def test_no_text_raises(lines: list[str]) -> None:
    text = "\n".join(["BEGIN:VCALENDAR", *lines, "END:VCALENDAR"])
    for one in read_calendar(text, Reading(timezone="UTC", start=0, end=ns(2030, 1, 1))).known:
        assert one.end > one.start


def test_the_horizon_cuts_nothing_that_touches_it() -> None:
    how = Reading(timezone="UTC", start=ns(2026, 11, 2), end=ns(2026, 11, 3))
    event_text = "BEGIN:VEVENT\nDTSTART:20261030T230000Z\nDURATION:PT2H\nRRULE:FREQ=DAILY\nEND:VEVENT"
    text = f"BEGIN:VCALENDAR\n{event_text}\nEND:VCALENDAR"
    first = datetime(2026, 11, 1, 23, tzinfo=UTC)
    starts = [round((first + timedelta(days=n)).timestamp()) * 10**9 for n in range(2)]
    assert [one.start for one in read_calendar(text, how).known] == starts


def test_a_date_as_the_end_of_a_repetition_is_its_whole_day() -> None:
    timed = event("DTSTART:20261101T230000Z", "DURATION:PT1H", "RRULE:FREQ=DAILY;UNTIL=20261103")
    assert len(spans(timed)) == 3
    whole = event("DTSTART;VALUE=DATE:20261101", "RRULE:FREQ=DAILY;UNTIL=20261103", zone="America/New_York")
    assert len(spans(whole)) == 3


def test_a_byte_order_mark_is_no_fault() -> None:
    text = "\ufeffBEGIN:VCALENDAR\nBEGIN:VEVENT\nDTSTART:20260501\nEND:VEVENT\nEND:VCALENDAR"
    assert len(read_calendar(text, Reading(timezone="UTC", start=0, end=ns(2030, 1, 1))).known) == 1
