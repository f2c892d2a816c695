"""What a format may be, what it says when it cannot work, and cases worth naming one by one."""

from __future__ import annotations

import csv
import io

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.errors import DataError, SettingsError
from monitor.parse import LineFormat, compile_parser
from monitor.parse.csv_lines import split
from monitor.parse.lines import FormatError
from monitor.parse.pattern_guard import LONGEST_LINE, Unsafe, check_pattern


def json_of(**more: object) -> LineFormat:
    return LineFormat(lines="json", size="units", **more)  # type: ignore[arg-type]


@pytest.mark.parametrize(
    ("format_", "message"),
    [
        (LineFormat(lines="json"), "size: missing"),
        (LineFormat(lines="json", size=3), "size: 3 is no field of a JSON object"),
        (LineFormat(lines="json", size="a..b"), "size: 'a..b' has an empty name"),
        (LineFormat(lines="json", size="a", time="a.b"), "lies inside 'a'"),
        (json_of(scale=0.0), "scale: 0.0"),
        (json_of(scale=float("nan")), "scale: nan"),
        (json_of(timezone="Mars/Olympus"), "timezone: 'Mars/Olympus' is not known"),
        (json_of(where=(("kind", ()),)), "where: 'kind'"),
        (LineFormat(lines="csv"), "size: missing"),
        (LineFormat(lines="csv", size=0), "size: there is no column 0"),
        (LineFormat(lines="csv", size="u", header=False), "size: 'u' is a name, but header = false"),
        (LineFormat(lines="csv", size=1, delimiter=";;"), "delimiter: ';;'"),
        (LineFormat(lines="csv", size=1, delimiter='"'), "delimiter"),
        (LineFormat(lines="number", size="u"), "size: a line of"),
        (LineFormat(lines="combined", size="bites"), "size: 'bites' is no part of a combined log line"),
        (LineFormat(lines="pairs", size="a b"), "size: 'a b' cannot be the key"),
        (LineFormat(lines="pattern", size="u"), "pattern: missing"),
        (LineFormat(lines="pattern", size="u", pattern="("), "pattern: .* is no regular expression"),
        (LineFormat(lines="pattern", size="u", pattern="(?P<u>(a+)+)"), "pattern: .* could take too long"),
        (LineFormat(lines="pattern", size="v", pattern=r"(?P<u>\d+)"), "size: the pattern has no group 'v'"),
        (LineFormat(lines="pattern", size=2, pattern=r"(\d+)"), "size: the pattern has no group 2"),
    ],
)
def test_an_impossible_format_is_refused_with_the_key(format_: LineFormat, message: str) -> None:
    with pytest.raises(SettingsError, match=message):
        compile_parser(format_)


@pytest.mark.parametrize(
    ("header", "message"),
    [
        (b"dock,size", "size: no column is called 'units'; the header line has: dock, size"),
        (b"units,units", "size: more than one column is called 'units'"),
        (b'"units', "the header line is not CSV"),
        (b"units,\xff", "the header line is not UTF-8"),
        (None, "the first line of the file is not known"),
    ],
)
def test_a_header_without_the_column_is_told(header: bytes | None, message: str) -> None:
    with pytest.raises(DataError, match=message):
        compile_parser(LineFormat(lines="csv", size="units")).parse(b"1,2\n", header=header)


def test_nothing_in_nothing_out() -> None:
    for format_ in (json_of(), LineFormat(lines="csv", size="units"), LineFormat(lines="number")):
        parsed = compile_parser(format_).parse(b"")
        assert (parsed.lines, parsed.sizes.size, parsed.skipped, parsed.rejected) == (0, 0, {}, {})


def test_a_block_without_its_last_newline_is_the_callers_mistake() -> None:
    with pytest.raises(ValueError, match="must end with a newline"):
        compile_parser(json_of()).parse(b'{"units":1}')


def test_types_and_shapes() -> None:
    parsed = compile_parser(json_of(time="at", stream=("dock",))).parse(
        b'{"units":2,"at":1,"dock":"b"}\n{}\n{"units":3.5,"at":2,"dock":"a"}\n{"units":4,"at":3,"dock":"b"}\n'
    )
    assert parsed.sizes.dtype == np.float64
    assert parsed.stamps is not None
    assert parsed.stamps.dtype == parsed.starts.dtype == parsed.ends.dtype == np.int64
    assert parsed.stream_codes.dtype == np.int32
    assert parsed.streams == ["b", "a"]
    assert parsed.stream_codes.tolist() == [0, 1, 0]
    assert parsed.starts.tolist() == [0, 33, 65]
    assert parsed.ends.tolist() == [29, 64, 94]
    assert compile_parser(json_of()).parse(b'{"units":2}\n').streams == [""]
    named = compile_parser(json_of(stream=("dock",)))
    assert named.parse(b'{"units":2}\n').streams == named.parse(b'{"units":0,"dock":"a"}\n').streams == []


@pytest.mark.parametrize(
    ("line", "reason"),
    [
        (b'{"units":NaN}', "not JSON"),
        (b'{"units":Infinity}', "not JSON"),
        (b'{"units":1e999}', "not finite"),
        (b'{"units":1' + b"0" * 400 + b"}", "not finite"),
        (b'{"units":"12.5"}', "not a number"),
        (b'{"units":true}', "not a number"),
        (b'{"units":null}', "not a number"),
        (b'{"units":1}{"units":2}', "not JSON"),
        (b'{"units":1', "not JSON"),
        (b'"units":1}', "not JSON"),
        (b"[1]", "field missing"),
        (b"{}", "field missing"),
        (b'{"units":0}', "zero"),
        (b'{"units":-1e-9}', "negative"),
        (b'{"units":1,"x":"\xff"}', "not UTF-8"),
        (b'{"units":1,"x":' + b"[" * 200 + b"]" * 200 + b"}", "nested too deep"),
        (b"[" * 100_000, "nested too deep"),
    ],
)
def test_json_lines_that_cannot_be_used(line: bytes, reason: str) -> None:
    good = b'{"units":5}\n' * 100
    parsed = compile_parser(json_of()).parse(good + line + b"\n" + good)
    assert parsed.rejected == {reason: 1}
    assert parsed.sizes.size == 200
    (sample,) = parsed.samples
    assert (sample.reason, sample.offset, sample.text) == (reason, len(good), line[:200])


def test_one_object_over_two_lines_is_two_bad_lines() -> None:
    parsed = compile_parser(json_of()).parse(b'{"units":1}\n' * 50 + b'{"units":\n7}\n' + b'{"units":1}\n' * 50)
    assert parsed.rejected == {"not JSON": 2}


def test_json_names_with_points_and_last_of_two() -> None:
    parsed = compile_parser(LineFormat(lines="json", size=r"a\.b.c")).parse(b'{"a.b":{"c":1},"a.b":{"c":2}}\n' * 20)
    assert parsed.sizes.tolist() == [2.0] * 20


def test_big_whole_numbers_are_sizes() -> None:
    parsed = compile_parser(json_of()).parse(b'{"units":123456789012345678901234567890}\n')
    assert parsed.sizes.tolist() == [123456789012345678901234567890.0]


def test_a_quoted_newline_makes_both_halves_bad() -> None:
    parser = compile_parser(LineFormat(lines="csv", size="units"))
    parsed = parser.parse(b'note,units\n"a\nb",5\nc,6\n', first=True)
    assert parsed.skipped == {"header": 1}
    assert parsed.rejected == {"not CSV": 2}
    assert parsed.sizes.tolist() == [6.0]


@settings(max_examples=300, derandomize=True, deadline=None)
@given(st.lists(st.text(alphabet='ab",; \t', max_size=6), min_size=1, max_size=5))
def test_csv_lines_written_by_the_standard_library_are_read_back(columns: list[str]) -> None:
    """Outside value: the csv module of the standard library (RFC 4180 quoting)."""
    text = io.StringIO()
    csv.writer(text, lineterminator="").writerow(columns)
    if text.getvalue():
        assert split(text.getvalue(), ",") == columns


@settings(max_examples=300, derandomize=True, deadline=None)
@given(st.lists(st.floats(min_value=1e-300, max_value=1e300), min_size=20, max_size=40), st.integers(0, 12))
def test_numbers_are_the_nearest_floats(values: list[float], places: int) -> None:
    """Outside value: float() of the standard library, correctly rounded."""
    texts = [f"{v:.{places}f}" if 1e-3 < v < 1e18 else repr(v) for v in values]
    parsed = compile_parser(LineFormat(lines="number")).parse("\n".join([*texts, ""]).encode())
    assert parsed.sizes.tolist() == [float(t) for t in texts if float(t) > 0]


def test_scale_overflow_is_not_finite() -> None:
    parsed = compile_parser(LineFormat(lines="number", scale=1e300)).parse(b"1e300\n5\n1e-320\n")
    assert parsed.rejected == {"not finite": 1}
    parsed = compile_parser(LineFormat(lines="number", scale=1e-300)).parse(b"1e-300\n")
    assert parsed.rejected == {"zero": 1}


def test_samples_are_few_and_the_first() -> None:
    parsed = compile_parser(LineFormat(lines="number")).parse(b"x\n" * 50 + b"0\n" * 50)
    assert [(s.reason, s.offset) for s in parsed.samples] == [
        ("not a number", 0), ("not a number", 2), ("not a number", 4), ("zero", 100), ("zero", 102), ("zero", 104),
    ]  # fmt: skip


@pytest.mark.parametrize(
    "pattern",
    [r"(a+)+$", r"(a|aa)+$", r"(.*)*x", r"(\w+\s?)*$", r".*.*.*x", r"(x+x+)+y", r"(?=a)a", r"(a)\1", r"(?i)units",
     r"^(([a-z])+.)+[A-Z]([a-z])+$"],
)  # fmt: skip
def test_expressions_that_could_take_for_ever_are_refused(pattern: str) -> None:
    """The first four and the last are the textbook examples of runaway matching: common practice."""
    with pytest.raises(Unsafe):
        check_pattern(pattern)


@pytest.mark.parametrize(
    "pattern",
    [r"^(?P<t>\S+) (?P<d>\w+) .* units=(?P<u>[\d.]+)", r"units=(?P<u>[\d.]+)", r"^[^ ]+ +(?P<u>\d+(?:\.\d+)?)$",
     r"(?:,\d{3})*x", r"^\[(?P<t>[^\]]*)\] (?:INFO|WARN) (?P<u>\d+)"],
)  # fmt: skip
def test_usual_expressions_are_allowed(pattern: str) -> None:
    check_pattern(pattern)


def test_a_line_too_long_for_a_pattern_is_not_matched() -> None:
    parser = compile_parser(LineFormat(lines="pattern", size="u", pattern=r"(?P<u>\d+)"))
    parsed = parser.parse(b"7" * (LONGEST_LINE + 1) + b"\n" + b"x " * 900 + b"8\n")
    assert parsed.rejected == {"too long for a pattern": 1}
    assert parsed.sizes.tolist() == [8.0]


@pytest.mark.parametrize("field", ['a"b', "a\x07", "order.a\tb"])
def test_a_field_that_no_record_can_name_is_refused_in_words(field: str) -> None:
    with pytest.raises(FormatError, match=r"size: .* holds a quote, a backslash or a control character"):
        compile_parser(LineFormat(lines="json", size=field))
