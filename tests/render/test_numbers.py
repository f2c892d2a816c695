"""Numbers as text: as many digits as their interval allows, and never another number."""

from __future__ import annotations

import pytest
from hypothesis import given
from hypothesis import strategies as st

from monitor.render.numbers import at_place, bounds_text, estimate, exact_at, percent, size_text, with_bounds
from monitor.render.times import (
    local,
    moment_text,
    plural,
    short_moment,
    span_short,
    span_words,
    table_time,
    utc_text,
)

SECOND = 1_000_000_000
DECEMBER = 1_796_133_909 * SECOND


@pytest.mark.parametrize(
    ("value", "interval", "text"),
    [
        (2.2083, (2.15, 2.27), "2.21 (2.15 to 2.27)"),
        (2.2083, (2.196, 2.220), "2.208 (2.196 to 2.220)"),
        (9437.0, (8080.0, 11040.0), "9 400 (8 100 to 11 000)"),
        (0.62, (0.58, 0.66), "0.62 (0.58 to 0.66)"),
        (0.00214, (0.0004, 0.0061), "0.002 (0.000 to 0.006)"),
        (5.0, (4.0, None), "5.0 (4.0 or more)"),
        (1234567.0, (1234500.0, 1234630.0), "1 234 570 (1 234 500 to 1 234 630)"),
    ],
)
def test_an_estimate_has_the_digits_its_interval_allows(value: float, interval: tuple[float, float], text: str) -> None:
    assert with_bounds(value, interval) == text


@given(
    st.floats(1e-4, 1e11),
    st.floats(0.001, 0.9),
)
def test_what_is_shown_is_the_number_within_a_third_of_its_half_width(value: float, relative: float) -> None:
    half = value * relative
    shown = float(estimate(value, (value - half, value + half)).replace(" ", ""))
    assert abs(shown - value) <= half / 6 * 1.0001
    low, high = (
        float(part.replace(" ", "")) for part in bounds_text(value, (value - half, value + half)).split(" to ")
    )
    assert abs(low - (value - half)) <= half / 6 * 1.0001
    assert abs(high - (value + half)) <= half / 6 * 1.0001


@given(st.floats(1e-3, 999_999))
def test_a_size_that_was_read_keeps_six_digits(value: float) -> None:
    assert float(size_text(value).replace(" ", "")) == pytest.approx(value, rel=5.1e-6)


def test_sizes_and_shares() -> None:
    assert [size_text(x) for x in (120.0, 0.5, 6000.0, 123456.0, 4.25)] == ["120", "0.5", "6 000", "123 456", "4.25"]
    assert [percent(x) for x in (0.0, 0.000025, 0.123, 0.9, 1.0)] == ["0 %", "0.0025 %", "12 %", "90 %", "100 %"]
    assert exact_at(2.5, -2) == "2.50"
    assert exact_at(2.475, -1) == "2.475"
    assert at_place(3.2e15, 14) == "3.2e15"


def test_times_are_local_with_their_zone() -> None:
    assert moment_text(DECEMBER, "Europe/Lisbon") == "1 Dec 2026 14:05 WET"
    assert moment_text(DECEMBER, "Asia/Tokyo", seconds=True) == "1 Dec 2026 23:05:09 JST"
    assert moment_text(DECEMBER, "America/Sao_Paulo") == "1 Dec 2026 11:05 UTC-03"
    assert short_moment(DECEMBER, "UTC", DECEMBER + 60 * SECOND) == "14:05 UTC"
    assert short_moment(DECEMBER, "UTC", DECEMBER + 86_400 * SECOND) == "1 Dec 14:05 UTC"
    assert short_moment(DECEMBER, "UTC", DECEMBER + 40 * 86_400 * SECOND) == "1 Dec 2026 14:05 UTC"
    assert table_time(DECEMBER, "UTC", named=True) == "2026-12-01 14:05 UTC"
    assert utc_text(DECEMBER + 5_000_000) == "2026-12-01T14:05:09.005Z"
    assert local(2**63 - 1, "UTC").year == 2262
    assert local(-(2**63), "UTC").year == 1677


def test_spans_and_plurals() -> None:
    assert [span_short(s * SECOND) for s in (0, 12, 61, 3600, 200_000)] == ["0 s", "12 s", "1 min", "1 h", "2 d"]
    assert span_words(60 * SECOND) == "1 minute"
    assert span_words(30 * 86_400 * SECOND) == "30 days"
    assert [plural(n, "event") for n in (0, 1, 2, 1234)] == ["0 events", "1 event", "2 events", "1 234 events"]
