"""Every parser against its slow plain twin, on arbitrary bytes and on good lines with a few bytes changed.

Fixed seed (derandomize): the tests either hold or do not.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from monitor.parse import LineFormat, compile_parser
from tests.references import plain_lines

FORMATS = {
    "json": LineFormat(lines="json", size="order.units", time="at", stream=("dock",)),
    "json where": LineFormat(
        lines="json", size="units", stream=("dock", "n"), where=(("kind", ("order", "2")), ("ok", ("true",)))
    ),
    "json local": LineFormat(lines="json", size="units", time="at", timezone="Europe/Lisbon", scale=0.5),
    "csv": LineFormat(lines="csv", size="units", time="at", stream=("dock",)),
    "csv numbers": LineFormat(
        lines="csv", size=3, time=2, stream=(1,), delimiter=";", where=((4, ("x", "y")),), time_unit="ms"
    ),
    "csv plain": LineFormat(lines="csv", size=1, stream=(2,), scale=1e300),
    "number": LineFormat(lines="number", scale=2.5),
    "combined": LineFormat(lines="combined", size="bytes", time="time", stream=("method", "status")),
    "pairs": LineFormat(lines="pairs", size="units", time="at", stream=("dock",)),
    "pairs where": LineFormat(lines="pairs", size="units", where=(("dock", ("north",)),)),
    "pattern": LineFormat(
        lines="pattern", size="u", time="t", stream=("d",), pattern=r"^(?P<t>\S+) (?P<d>\w*)(?: u=(?P<u>[\d.e-]+))?"
    ),
}

SIZES = ["1", "12.5", "0", "-3", "1e3", "1e999", "1E-2", "007", ".5", "5.", "+5", "nan", "Infinity", "", "x", "1_0"]
SIZES += [
    "123456789012345678",
    "0.1",
    "99999999999999.99",
    "1e-400",
    "-0",
    "1.2.3",
    "--1",
    "1-2",
    ".",
    "-",
    '"7"',
    "true",
    "null",
    "[1]",
    "1.7e308",
]
TIMES = [
    "2026-12-01T14:05:36Z",
    "2026-12-01T14:05:36.123+01:00",
    "2026-12-01 14:05:36,5",
    "1764597936",
    "1764597936.25",
]
TIMES += ["1764597936123", "2026-10-25T01:30:00", "2026-03-29 01:30:00", "10/Oct/2000:13:55:36 -0700", "2026-12-01"]
TIMES += ["[10/Oct/2000:13:55:36 +0000]", "1969-12-31T23:59:59Z", "2200-12-31T23:59:60Z", "2201-01-01", "never", ""]
TIMES += ["2024-02-30T00:00:00Z", "2026-12-01T24:00:00Z", "99999999999999999999", "2026-12-01T14:05Z", "1e9"]
DOCKS = ["north", "dock 7", "", "æøå", "a\tb", "x" * 201, "\u202e", "7", "true", "1.5", "null", '"q"', "a;b,c", "-"]

# Usable values come first and twice: most lines should be events, or little is compared.
sizes = st.sampled_from(SIZES[:2] * 12 + ["123456.75", "88", "0.001"] * 4 + SIZES)
times = st.sampled_from(TIMES[:7] * 6 + TIMES)
docks = st.sampled_from(DOCKS[:2] * 12 + DOCKS)

TEMPLATES = {
    "json": [
        '{{"order":{{"units":{size}}},"at":"{time}","dock":"{dock}"}}',
        '{{"order":{{"units":{size}}},"at":"{time}","dock":"{dock}"}}',
        ' {{"dock":{dock}, "order" : {{"x":"\\u00e9\\"","units":{size}}},"at":1764597936.25}}',
        '{{"at":1764597936123,"order":{{"units":{size}}},"dock":"{dock}","order":{{"units":3}}}}',
        '{{"units":{size},"dock":"{dock}","n":7,"kind":"order","ok":true,"at":"{time}"}}',
        '{{"units":{size},"dock":"{dock}","n":7,"kind":"order","ok":true,"at":"{time}"}}',
        '{{"kind":2.0,"ok":true,"units":{size},"dock":"{dock}","n":{size}}}',
        '{{"kind":"ping","ok":false}}',
        '{{"units":{size},"at":"{time}"}}',
        "[" * 120 + "1" + "]" * 120,
        '{{"x":' + "[" * 99 + "]" * 99 + ',"units":{size},"order":{{"units":5}},"at":"2026-12-01","dock":"b"}}',
    ],
    "csv": [
        "{dock},{time},{size},x",
        "{dock},{time},{size},x",
        "{dock}, {time} ,{size}\t,x",
        '"{dock}","{time}","{size}",x',
        '{dock},{time},{size},"a ""b"", c"',
        "{dock};{time};{size};x",
        "{dock};{time};{size};y;",
        '"{dock}";{time};{size};"x"',
        "{size},{dock}",
        "{size}",
    ],
    "number": ["{size}", " {size}\t", "{size}\r"],
    "combined": [
        '1.2.3.4 - - [{time}] "GET /a HTTP/1.1" 200 {size} "-" "agent"',
        '1.2.3.4 - joe [10/Oct/2000:13:55:36 -0700] "GET /{dock} HTTP/1.0" 404 {size}',
        '1.2.3.4 - joe [01/Jan/2026:00:00:59 +0000] "POST /a\\" HTTP/1.0" 201 {size} "http://x/" "a b" 0.25',
        '1.2.3.4 - joe [10/Oct/2000:13:55:36 -0700] "{dock} /a b" 404 {size} "',
        '1.2.3.4 a\tb joe [10/Oct/2000:13:55:36 -0700] "GET /a HTTP/1.0" 200 {size}',
        '1.2.3.4 - [x [{time}] "GET /a\\\\ HTTP/1.0" 200 {size} "]" "[en]"',
        '1.2.3.4 - joe [{time}] "GET /a b HTTP/1.0" 200 {size}',
    ],
    "pairs": [
        "at={time} units={size} dock={dock} rest",
        'level=info units={size} dock="{dock}"\tat="{time}"',
        "x units=5 units={size}  at=2026-12-01T14:05:36Z dock=north",
        "at=1764597936 msg=a=b units={size} dock=north",
        "xunits=5 dock=north at={time} units={size}",
    ],
    "pattern": ["2026-12-01T14:05:36Z north u={size}", "{time} {dock} u={size}", "1764597936 {dock} u={size}"],
}


@st.composite
def changed_line(draw: st.DrawFn, family: str) -> bytes:
    """A line of a format, perhaps with a byte or two changed."""
    template = draw(st.sampled_from(TEMPLATES[family]))
    line = bytearray(template.format(size=draw(sizes), time=draw(times), dock=draw(docks)).encode())
    for _ in range(draw(st.sampled_from([0, 0, 0, 0, 1, 2]))):
        at = draw(st.integers(0, len(line)))
        if draw(st.booleans()):
            line[at : at + 1] = draw(st.sampled_from([b"", b'"', b"\\", b",", b"\xff", b"\0", b" ", b"{", b"\r", b"="]))
        else:
            line[at:at] = draw(st.binary(max_size=3))
    return bytes(line).replace(b"\n", b"") + draw(st.sampled_from([b"\n", b"\n", b"\n", b"\r\n", b" \n"]))


def blocks_of(name: str) -> st.SearchStrategy[bytes]:
    """Blocks of mixed lines, and blocks of two long runs (the fast ways are taken by runs)."""
    line = changed_line(name.split()[0])
    any_line = st.binary(max_size=30).map(lambda b: b.replace(b"\n", b"") + b"\n")
    mixed = st.lists(st.one_of(line, line, line, line, any_line), max_size=12).map(b"".join)
    runs = st.tuples(line, st.integers(1, 80), line, st.integers(0, 80), line).map(
        lambda t: t[0] * t[1] + t[2] * t[3] + t[4]
    )
    return st.one_of(mixed, runs)


def agree(format_: LineFormat, block: bytes, header: bytes | None, first: bool) -> None:
    parsed = compile_parser(format_).parse(block, header=header, first=first)
    lines, events, skipped, rejected = plain_lines.read(format_, block, header, first)
    assert (parsed.lines, parsed.skipped, parsed.rejected) == (lines, skipped, rejected)
    assert parsed.lines == len(parsed.sizes) + sum(parsed.skipped.values()) + sum(parsed.rejected.values())
    assert parsed.sizes.tolist() == [e[0] for e in events]
    if format_.time is None:
        assert parsed.stamps is None
    else:
        assert parsed.stamps.dtype == np.int64
        assert parsed.stamps.tolist() == [e[1] for e in events]
    assert [parsed.streams[c] for c in parsed.stream_codes] == [e[2] for e in events]
    assert list(zip(parsed.starts.tolist(), parsed.ends.tolist(), strict=True)) == [e[3:] for e in events]
    for sample in parsed.samples:
        assert sample.reason in rejected
        assert block[sample.offset :].startswith(sample.text)


@pytest.mark.parametrize("name", FORMATS)
@settings(max_examples=150, derandomize=True, deadline=None, suppress_health_check=list(HealthCheck))
@given(data=st.data(), first=st.booleans())
def test_fast_and_plain_agree(name: str, data: st.DataObject, first: bool) -> None:
    block = data.draw(blocks_of(name))
    format_ = FORMATS[name]
    header = b"dock,at,units,more" if name == "csv" and not first else None
    if name == "csv" and first:
        block = b"\xef\xbb\xbfdock, at ,units,more\r\n" + block
    agree(format_, block, header, first)


@pytest.mark.parametrize("name", FORMATS)
@settings(max_examples=40, derandomize=True, deadline=None, suppress_health_check=list(HealthCheck))
@given(data=st.data(), cut=st.integers(0, 12))
def test_what_comes_out_does_not_depend_on_where_blocks_are_cut(name: str, data: st.DataObject, cut: int) -> None:
    block = data.draw(blocks_of(name))
    header = b"dock,at,units,more" if name == "csv" else None
    parser = compile_parser(FORMATS[name])
    lines = [line + b"\n" for line in block.split(b"\n")[:-1]]
    parts = [parser.parse(b"".join(p), header=header) for p in (lines[:cut], lines[cut:])]
    whole = parser.parse(block, header=header)
    assert whole.sizes.tolist() == parts[0].sizes.tolist() + parts[1].sizes.tolist()
    assert whole.lines == parts[0].lines + parts[1].lines
    names = [p.streams[c] for p in parts for c in p.stream_codes]
    assert [whole.streams[c] for c in whole.stream_codes] == names
