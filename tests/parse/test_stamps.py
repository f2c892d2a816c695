"""Stamps against printed examples of the standards, the standard library, and the calendar's odd days."""

from __future__ import annotations

import datetime as dt
from zoneinfo import ZoneInfo

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.parse.stamps import NO_STAMP, StampReader

S = 1_000_000_000


def ns(*when: int, zone: dt.tzinfo = dt.UTC) -> int:
    return int(dt.datetime(*when, tzinfo=zone).timestamp()) * S


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        # RFC 3339 section 5.8, its examples [from memory]
        ("1985-04-12T23:20:50.52Z", ns(1985, 4, 12, 23, 20, 50) + 520_000_000),
        ("1996-12-19T16:39:57-08:00", ns(1996, 12, 20, 0, 39, 57)),
        ("1990-12-31T23:59:60Z", ns(1991, 1, 1)),
        ("1990-12-31T15:59:60-08:00", ns(1991, 1, 1)),
        ("1937-01-01T12:00:27.87+00:20", NO_STAMP),  # before 1970
        # the example of the Apache server's manual on log files [from memory]
        ("[10/Oct/2000:13:55:36 -0700]", ns(2000, 10, 10, 20, 55, 36)),
        ("10/Oct/2000:13:55:36 -0700", ns(2000, 10, 10, 20, 55, 36)),
        # POSIX, "Seconds Since the Epoch", and its well-known round number: common practice
        ("1970-01-01T00:00:00Z", 0),
        ("2001-09-09T01:46:40Z", 1_000_000_000 * S),
        ("1000000000", 1_000_000_000 * S),
        ("1000000000.000000001", 1_000_000_000 * S + 1),
        ("1000000000123", 1_000_000_000 * S + 123_000_000),
        ("1000000000123456", 1_000_000_000 * S + 123_456_000),
        ("1000000000123456789", 1_000_000_000 * S + 123_456_789),
        ("2026-12-01 14:05:36,123", ns(2026, 12, 1, 14, 5, 36) + 123_000_000),
        ("2026-12-01T14:05:36.1234567899Z", ns(2026, 12, 1, 14, 5, 36) + 123_456_789),
        ("2026-12-01 14:05:36 +0130", ns(2026, 12, 1, 12, 35, 36)),
        ("2026-12-01t14:05:36z", ns(2026, 12, 1, 14, 5, 36)),
        ("2026-12-01T14:05", ns(2026, 12, 1, 14, 5)),
        ("2026-12-01", ns(2026, 12, 1)),
        ("2200-12-31T23:59:59Z", ns(2200, 12, 31, 23, 59, 59)),
        ("2201-01-01T00:00:00Z", NO_STAMP),
        ("2000-02-29T00:00:00Z", ns(2000, 2, 29)),
        ("2100-02-29T00:00:00Z", NO_STAMP),  # 2100 is no leap year
        ("2026-13-01T00:00:00Z", NO_STAMP),
        ("2026-12-01T24:00:00Z", NO_STAMP),
        ("2026-12-01T14:60:00Z", NO_STAMP),
        ("2026-12-01T14:05:60Z", NO_STAMP),
        ("2026-12-01T14:05:36+24:00", NO_STAMP),
        ("2026-12-01T14:05:36.Z", NO_STAMP),
        ("2026-12-01T14:05:36Z ", NO_STAMP),
        ("10/Okt/2000:13:55:36 -0700", NO_STAMP),
        ("1e9", NO_STAMP),
        ("-5", NO_STAMP),
        ("", NO_STAMP),
        ("２０２６-12-01", NO_STAMP),  # digits of another script
    ],
)
def test_one_by_one_and_in_bulk(text: str, expected: int) -> None:
    reader = StampReader()
    assert reader.text(text) == expected
    assert reader.texts([text] * 20).tolist() == [expected] * 20
    mixed = reader.texts([text, "2026-12-01T00:00:00Z"] * 10)
    assert mixed.tolist() == [expected, ns(2026, 12, 1)] * 10


def test_a_clock_put_back_gives_the_first_occurrence() -> None:
    """Lisbon 2026-10-25: 02:00 WEST becomes 01:00 WET; PEP 495 fold=0 is the first 01:30."""
    reader = StampReader("Europe/Lisbon")
    for texts in (["2026-10-25T01:30:00"], ["2026-10-25T01:30:00"] * 20):
        assert set(reader.texts(texts).tolist()) == {ns(2026, 10, 25, 0, 30)}
    assert reader.text("2026-10-25T02:00:00") == ns(2026, 10, 25, 2, 0)
    assert reader.text("2026-10-25T01:30:00+00:00") == ns(2026, 10, 25, 1, 30)


def test_a_time_that_does_not_exist_is_read_with_the_offset_before() -> None:
    """Lisbon 2026-03-29: 01:00 WET becomes 02:00 WEST."""
    assert StampReader("Europe/Lisbon").text("2026-03-29T01:30:00") == ns(2026, 3, 29, 1, 30)
    assert StampReader("Europe/Lisbon").text("2026-03-29T02:30:00") == ns(2026, 3, 29, 1, 30)


@pytest.mark.parametrize("zone", ["Europe/Lisbon", "America/St_Johns", "Australia/Lord_Howe", "Asia/Kathmandu", "UTC"])
@settings(max_examples=150, derandomize=True, deadline=None)
@given(moments=st.lists(st.datetimes(dt.datetime(1970, 1, 2), dt.datetime(2200, 12, 30)), min_size=1, max_size=40))  # noqa: DTZ001
def test_local_stamps_agree_with_the_standard_library(zone: str, moments: list[dt.datetime]) -> None:
    """datetime and zoneinfo of the standard library, fold=0."""
    texts = [m.isoformat(sep=" ", timespec="microseconds") for m in moments]
    found = StampReader(zone).texts(texts).tolist()
    for moment, stamp in zip(moments, found, strict=True):
        aware = moment.replace(tzinfo=ZoneInfo(zone))
        since = aware.astimezone(dt.UTC) - dt.datetime(1970, 1, 1, tzinfo=dt.UTC)
        assert stamp == (since.days * 86400 + since.seconds) * S + since.microseconds * 1000


def test_every_day_of_two_centuries() -> None:
    """Against numpy's own calendar."""
    days = np.arange(np.datetime64("1970-01-01"), np.datetime64("2201-01-01"))
    texts = [f"{day}T12:00:00Z" for day in days.astype(str)]
    expected = days.astype("datetime64[ns]").astype(np.int64) + 12 * 3600 * S
    assert (StampReader().texts(texts) == expected).all()


def test_units_of_numbers() -> None:
    assert StampReader(unit="ms").text("1000") == S
    assert StampReader(unit="s").value(100_000_000_000) == NO_STAMP
    assert StampReader(unit="ns").value(5) == 5
    assert StampReader().value(1764597936.123) == 1_764_597_936_123_000_000
    assert (
        StampReader().values([1764597936.123, 1764597936123, "1764597936.123"]).tolist()
        == [1_764_597_936_123_000_000] * 3
    )
    assert StampReader().values([True, None, -1, 2.5e300, [1], float("nan")]).tolist() == [NO_STAMP] * 6


def test_bulk_reading_does_not_fall_back() -> None:
    """The usual forms are read as a matrix: no row is left to the slow reader."""
    for text in ("2026-12-01T14:05:36.123Z", "2026-12-01 14:05:36", "10/Oct/2000:13:55:36 -0700"):
        matrix = np.frombuffer(text.encode() * 50, np.uint8).reshape(50, len(text))
        assert StampReader().matrix(matrix)[1].all()
