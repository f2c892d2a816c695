"""The compiled reader against the same slow plain twin as the others, wherever a line stands in its block.

Fixed seed (derandomize): the tests either hold or do not.
"""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from monitor.parse import LineFormat, Parser, compile_parser, desks
from monitor.parse import compiled as compiled_module
from monitor.parse.compiled import CompiledParser
from tests.parse.test_twins import FORMATS, blocks_of, changed_line
from tests.references import plain_lines

COMPILED = {
    "csv": FORMATS["csv"],
    "csv numbers": LineFormat(lines="csv", size=3, time=2, stream=(1,), delimiter=";", time_unit="ms"),
    "csv plain": FORMATS["csv plain"],
    "csv tabs": LineFormat(lines="csv", size=3, time=2, stream=(1,), delimiter="\t", timezone="Europe/Lisbon"),
    "pairs": FORMATS["pairs"],
    "pairs same": LineFormat(lines="pairs", size="units", time="at", stream=("at",)),
    "combined": LineFormat(lines="combined", size="bytes", time="time", stream=("method",)),
    "combined status": LineFormat(lines="combined", size="status", stream=("user",)),
    "json": FORMATS["json"],
    "json local": FORMATS["json local"],
    "json flat": LineFormat(lines="json", size="units", time="at", stream=("dock",)),
    "json size only": LineFormat(lines="json", size="units", scale=1e300),
    "json numbers": LineFormat(lines="json", size="units", time="n", stream=("dock",)),
    "json ms": LineFormat(lines="json", size="units", time="n", time_unit="ms"),
    "json ns": LineFormat(lines="json", size="units", time="n", time_unit="ns", stream=("n2",)),
    "json deep": LineFormat(lines="json", size="a.b.units", time="a.at", stream=("a.b.dock",)),
}

# Numbers where exactness, the grammar, or the width of a word ends.
NUMBERS = ["9007199254740992", "9007199254740993", "123456789012345678", "1234567890123456789", "9223372036854775808"]
NUMBERS += ["0.1", "1234567.1234567", "12345678.5", "0.12345678", "0.123456789012345678", "99999999.99999999", "1e3"]
NUMBERS += ["1E-2", "-1", "-0", "00", "01", "0", "1.", ".5", "1764597936", "1764597936123", "1764597936123456", "-5.5"]
NUMBERS += ["1764597936123456789", "7289567999", "7289568000", "99999999999", "100000000000", "100000000000000", "+1"]
NUMBERS += [
    "100000000000000000",
    "17.",
    "1.5e",
    "2e+1",
    "123456789.123456789",
    "0.0000001",
    "true",
    "null",
    '"5"',
    "[]",
]
TEXTS = ["north", "12345678", "a much longer name, longer than thirty-two bytes", "æøå", "", "x" * 200, "x" * 201]
TEXTS += ["\\u00e6", "\\ud83d\\ude00", "\\ud800", "\\n", "\\x", '\\"', "a\\\\", "\\", "\u202e", "a\tb", "7", "-7"]
TEXTS += ['a""b']
STAMPS = ["2026-12-01T14:05:36Z", "2026-12-01T14:05:36.123456789Z", "2026-12-01T14:05:36.1234567890Z"]
STAMPS += ["2026-12-01T14:05:36.1Z", "2026-12-01 14:05:36,25+01:30", "2026-12-01T14:05:36-0100", "2026-12-01T14:05:36"]
STAMPS += ["2026-12-01T14:05:60Z", "2024-02-29T23:59:59Z", "2023-02-29T00:00:00Z", "2100-02-29T00:00:00Z"]
STAMPS += ["1970-01-01T00:00:00+00:01", "2200-12-31T23:59:59.9-00:01", "1969-12-31T23:59:59Z", "2026-13-01T00:00:00Z"]
STAMPS += ["2026-04-31T00:00:00Z", "2026-12-01T24:00:00Z", "2026-12-01T14:60:00Z", "2026-12-01t14:05:36z", "1764597936"]
SHAPES = [
    '{{"at":"{stamp}","order":"{text}","dock":"{name}","units":{number},"n":{n},"n2":{n}}}',
    '{{"at":"{stamp}","order":"{text}","dock":"{name}","units":{number},"n":{n},"n2":{n}}}',
    ' {{ "units" : {number} , "dock":\t"{name}","x":[1,-2.5e3,{{"units":3}},[],{{}}],"at":"{stamp}" }} ',
    '{{"a":{{"b":{{"units":{number},"dock":"{name}","n":{n}}},"at":"{stamp}","x":"{text}"}},"y":{n}}}',
    '{{"a":{{"b":{{"units":{number},"dock":"{name}"}},"at":"{stamp}"}},"a":{n}}}',
    '{{"a":{{"b":{{"units":{number},"dock":"{name}"}},"at":"{stamp}"}},"a":{{"x":{n}}}}}',
    '{{"order":{{"units":{number}}},"dock":"{name}","at":"{stamp}","order":{{}}}}',
    '{{"a":1,"a":{{"b":{{"units":{number},"dock":"{name}"}},"at":"{stamp}"}}}}',
    '{{"units":{number},"dock":"{name}","at":"{stamp}","units":{number},"{text}":{n}}}',
    '{{"n":{n},"dock":{n},"units":{number},"at":{n},"n2":"{name}","z":true,"f":false,"0":null}}',
    '{{"units":{number},"dock":"{name}","at":"{stamp}","note":"{text}"}} x',
    '{{"un\\u0069ts":{number},"dock":"{name}","at":"{stamp}"}}',
]


TEXT_SHAPES = {
    "csv": ["{name},{stamp},{number},x", "{name},{stamp},{number},x,y", '"{name}","{stamp}","{number}",{text}']
    + ['{name},{stamp},{number},"a, ""{text}"""', "{name};{stamp};{number}", "{name}\t{stamp}\t{number}\t{text}"]
    + ["{number},{name}", '{number},"{name}"', '"{name}"x,{stamp},{number},x', "{n},{stamp},{number},"]
    + ["{name},{stamp},{number},x"] * 4,
    "pairs": ["at={stamp} units={number} dock={name} {text}"] * 3
    + ['msg="{text}" at="{stamp}" units="{number}"\tdock="{name}" ', "units=1 units={number} at={n} =x dock={name}"]
    + ['at={stamp} x=a=b units={number}  dock="{name}" z', 'at={stamp} units={number} dock={name}" x="y'],
    "combined": ['1.2.3.4 - joe [{log}] "GET /{text} HTTP/1.1" 200 {number} "-" "agent"'] * 3
    + ['{name} - {name} [{log}] "{text} /a b" 404 {number}', '::1 - - [{stamp}] "POST /a HTTP/1.0" {n} {number} x']
    + ['::1 - - [{log}] "POST  HTTP/1.0" 201 {number}', '::1 - - {log} "POST /a HTTP/1.0" 201 {number}\t']
    + ['1.2.3.4  - [{log}] "GET /a HTTP/1.1" 20 {number}', '1.2.3.4 - - [{log}] "" - -'],
}
LOG_STAMPS = ["10/Oct/2000:13:55:36 -0700", "29/Feb/2024:23:59:59 +0000", "29/Feb/2023:23:59:59 +0000"]
LOG_STAMPS += ["01/Jan/2026:00:00:60 +0000", "01/jan/2026:00:00:00 +0000", "01/Jan/2026:00:00:00"]
LOG_STAMPS += ["31/Dec/2200:23:59:59 -0100", "01/Jan/1970:00:30:00 +0100", "01/May/2026:00:30:00 +01:00"]
LOG_STAMPS += ["01/May/2026:00:30:00 +0160", "32/May/2026:00:00:00 +0000", "01/May/2026:24:00:00 +0000"]


@st.composite
def hard_line(draw: st.DrawFn, family: str) -> bytes:
    """A line of one of the shapes, most of them good, perhaps with a byte changed."""
    seldom = st.integers(0, 3).map(bool)
    stamps = [*STAMPS, *LOG_STAMPS, *NUMBERS, *(f"[{stamp}]" for stamp in LOG_STAMPS)]
    line = bytearray(
        draw(st.sampled_from(TEXT_SHAPES.get(family, SHAPES)))
        .format(
            stamp=draw(st.sampled_from(STAMPS[:4] if draw(seldom) else stamps)),
            log=draw(st.sampled_from(LOG_STAMPS[:2] if draw(seldom) else stamps)),
            text="plain" if draw(seldom) else draw(st.sampled_from(TEXTS)),
            name=draw(st.sampled_from(["north", "south", "a-longer-dock"] if draw(seldom) else TEXTS)),
            number=draw(st.sampled_from(["12.5", "7", "1234.75"] if draw(seldom) else NUMBERS)),
            n="1764597936123" if draw(seldom) else draw(st.sampled_from(NUMBERS)),
        )
        .encode()
    )
    if draw(st.integers(0, 5)) == 0:
        at = draw(st.integers(0, len(line)))
        others = [
            b"",
            b'"',
            b"\\",
            b"\xff",
            b"\xc3",
            b"\0",
            b" ",
            b"{",
            b"}",
            b"\r",
            b",",
            b"\t",
            b"=",
            b"]",
            b"-",
            b";",
        ]
        line[at : at + 1] = draw(st.sampled_from(others))
    return bytes(line).replace(b"\n", b"") + draw(st.sampled_from([b"\n", b"\n", b"\n", b"\r\n", b" \n", b"\r\r\n"]))


def any_block(name: str) -> st.SearchStrategy[bytes]:
    family = name.split()[0]
    lines = st.one_of(hard_line(family), hard_line(family), changed_line(family))
    mixed = st.lists(lines, max_size=12).map(b"".join)
    run = st.tuples(lines, st.integers(1, 6), lines).map(lambda t: t[0] * t[1] + t[2] + t[0])
    return st.one_of(mixed, run, blocks_of(family))


def agree(
    parser: Parser, format_: LineFormat, block: bytes, *, header: bytes | None = None, first: bool = False
) -> None:
    parsed = parser.parse(block, header=header, first=first)
    lines, events, skipped, rejected = plain_lines.read(format_, block, header, first)
    assert (parsed.lines, parsed.skipped, parsed.rejected) == (lines, skipped, rejected)
    assert parsed.sizes.tolist() == [e[0] for e in events]
    if format_.time is not None:
        assert parsed.stamps.tolist() == [e[1] for e in events]
    assert [parsed.streams[c] for c in parsed.stream_codes] == [e[2] for e in events]
    assert parsed.streams == list(dict.fromkeys(e[2] for e in events)) or not format_.stream
    assert list(zip(parsed.starts.tolist(), parsed.ends.tolist(), strict=True)) == [e[3:] for e in events]
    assert all(block[s.offset :].startswith(s.text) for s in parsed.samples)


@pytest.mark.parametrize("name", COMPILED)
@settings(max_examples=150, derandomize=True, deadline=None, suppress_health_check=list(HealthCheck))
@given(data=st.data(), filling=st.sampled_from([0, 1, 63, 64, 65, 200]), first=st.booleans())
def test_compiled_and_plain_agree(name: str, data: st.DataObject, filling: int, first: bool) -> None:
    format_ = COMPILED[name]
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(compiled_module, "_FEWEST_BYTES", 1)
        parser = compile_parser(format_, compiled=True)
        assert name.startswith("csv") or isinstance(parser, CompiledParser)
        for _ in range(2):  # the second block meets the layouts that the first one left
            block = data.draw(any_block(name)) + b"\n" * filling
            header = b"dock,at,units,more" if name == "csv" else None
            if header and first:
                block = header + b"\n" + block
            agree(parser, format_, block, header=header, first=first)


@pytest.mark.parametrize("name", COMPILED)
def test_each_hard_value_in_each_shape(name: str) -> None:
    """One value of an otherwise good line is hard; good lines stand between, so that their layout is known."""
    good = {"stamp": STAMPS[0], "log": LOG_STAMPS[0], "text": "plain", "name": "north", "number": "12.5"}
    good["n"] = "1764597936123"
    stamps = [*STAMPS, *LOG_STAMPS, *NUMBERS, *(f"[{stamp}]" for stamp in LOG_STAMPS)]
    hard = {"stamp": stamps, "log": stamps, "text": TEXTS, "name": TEXTS, "number": NUMBERS, "n": NUMBERS}
    lines = []
    for shape in dict.fromkeys(TEXT_SHAPES.get(name.split()[0], SHAPES)):
        for slot, values in hard.items():
            if f"{{{slot}}}" in shape:
                lines += [line for v in values for line in (shape.format(**good), shape.format(**{**good, slot: v}))]
    block = "\n".join([*lines, ""]).encode()
    header = b"dock,at,units,more" if name == "csv" else None
    agree(compile_parser(COMPILED[name], compiled=True), COMPILED[name], block, header=header)


GOOD = {
    "json flat": b'{"at":"2026-12-01T14:05:36.5Z","n":[-1.5,{"x":true}],"dock":"north","units":12.5,"y":"a \\u00e6"}',
    "csv": b'north,2026-12-01T14:05:36.5Z,12.5,"a ""b"", c"',
    "pairs": b'level=info at="2026-12-01T14:05:36+01:00" units=12.5 dock=north msg="a \\"b\\""',
    "combined": b'1.2.3.4 - joe [10/Oct/2000:13:55:36 -0700] "GET /a HTTP/1.1" 200 1234 "-" "agent"',
}


@pytest.mark.parametrize("name", GOOD)
def test_every_byte_of_a_good_line_matters_as_it_does_to_the_twin(name: str) -> None:
    """Each byte replaced, left out and put in, each time right behind the good line whose layout is known."""
    good, format_ = GOOD[name], COMPILED[name]
    pieces = []
    for at in range(len(good) + 1):
        for byte in (b"", b"\xff", *(b"%c" % c for c in b'"\\:,07.e- \r}]=Z')):
            pieces += [good, good[:at] + byte + good[at + 1 :], good, good[:at] + byte + good[at:]]
    block = b"\n".join([*pieces, good, b""])
    header = b"dock,at,units,more" if name == "csv" else None
    agree(compile_parser(format_, compiled=True), format_, block, header=header)


def good_lines(n: int) -> list[bytes]:
    chance = np.random.default_rng(3)
    return [
        b'{"at":"2026-12-01T%02d:%02d:%02d.%03dZ","dock":"dock %d","units":%d.%02d,"x":"%s"}\n'
        % (i // 3600, i // 60 % 60, i % 60, i % 1000, chance.integers(0, 40), i + 1, i % 100, b"y" * int(i % 70))
        for i in range(n)
    ]


def test_nearly_all_plain_lines_are_settled_without_the_slower_way() -> None:
    format_ = COMPILED["json flat"]
    reader, desk = _Counting(), desks.json_desk(format_)
    assert desk is not None
    parser = CompiledParser(format_, desk, reader, reader)  # type: ignore[arg-type]
    parser.parse(b"".join(good_lines(5000)))
    assert reader.lines <= 2  # the last ones only, which stand too near to the block's end


class _Counting:
    """In place of the slower way: counts what reaches it."""

    def __init__(self) -> None:
        self.lines = 0

    def read(self, cut: object, found: object) -> None:
        self.lines += cut.ends.size  # type: ignore[attr-defined]

    def parse(self, block: bytes, **_: object) -> None:
        raise AssertionError("a large block must not take the slower way as a whole")


def test_numbers_are_the_nearest_floats() -> None:
    """As float() of the standard library gives them, whose digits are rounded correctly."""
    chance = np.random.default_rng(11)
    texts = []
    for _ in range(20_000):
        digits = "".join(map(str, chance.integers(0, 10, chance.integers(1, 20))))
        point = int(chance.integers(0, len(digits) + 1))
        whole, rest = digits[:point].lstrip("0") or "0", digits[point:]
        texts.append(f"{whole}.{rest}" if rest else whole)
    texts = [text for text in texts if float(text) > 0]
    block = "".join(f'{{"units":{text},"x":"{"y" * 40}"}}\n' for text in texts).encode()
    parsed = compile_parser(LineFormat(lines="json", size="units"), compiled=True).parse(block)
    assert parsed.sizes.tolist() == [float(text) for text in texts]


def test_more_names_than_the_table_holds() -> None:
    format_ = COMPILED["json flat"]
    lines = [b'{"units":%d,"at":1764597936,"dock":"d%d"}\n' % (i + 1, i) for i in range(40_000)]
    block = b"".join(lines)
    fast, plain = (compile_parser(format_, compiled=c).parse(block) for c in (True, False))
    assert fast.streams == plain.streams
    assert fast.stream_codes.tolist() == plain.stream_codes.tolist()
    assert fast.sizes.tolist() == plain.sizes.tolist()


def test_lines_that_are_not_utf8_do_not_disturb_their_neighbours() -> None:
    format_ = COMPILED["json flat"]
    lines = good_lines(300)
    for i in range(0, 300, 7):
        lines[i] = lines[i].replace(b"dock", b"d\xe6ck") if i % 2 else lines[i].replace(b"dock", "døck".encode())
    agree(compile_parser(format_, compiled=True), format_, b"".join(lines))


def test_conditions_and_several_stream_fields_keep_the_reader_of_records() -> None:
    for name in ("json where", "pairs where", "combined", "number", "pattern"):
        assert not isinstance(compile_parser(FORMATS[name], compiled=True), CompiledParser)
