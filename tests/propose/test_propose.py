"""From a log of each format to settings that are valid, and to the doubts a person must settle."""

from __future__ import annotations

import json
import random
import tomllib

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.errors import DataError
from monitor.parse import compile_parser
from monitor.plan import read_plan
from monitor.propose import FileSample, Piece, Proposal, propose
from monitor.propose.names import feed_name
from monitor.propose.toml_text import comment, key, quoted
from tests.propose.logs import log, stamp

EXPECTED = {
    "json": ("json", "units", "placed_at", ("cart.site.dock",), "units"),
    "csv": ("csv", "amount", "paid_at", ("branch",), "EUR"),
    "csv without header": ("csv", 3, 1, (2,), "units"),
    "combined": ("combined", "bytes", "time", (), "bytes"),
    "pairs": ("pairs", "duration_s", "ts", ("node",), "s"),
    "number": ("number", None, None, (), "units"),
    "pattern": ("pattern", "size", "time", ("stream",), "ms"),
}


def of(data: bytes, name: str = "logs/a-2026-11-01.log") -> Proposal:
    sample = FileSample(name=name, pieces=(Piece(offset=0, data=data),), size=len(data))
    return propose((sample,), ("logs/a-*.log",))


def records(*items: dict[str, object]) -> bytes:
    return "".join(json.dumps(item) + "\n" for item in items).encode()


def doubts(proposal: Proposal) -> str:
    return "\n".join(proposal.doubts)


@pytest.mark.parametrize("kind", EXPECTED)
def test_every_format_is_recognised_and_its_settings_are_valid(kind: str) -> None:
    data = log(kind)
    proposal = of(data)
    found = proposal.format
    stream = () if kind == "combined" else found.stream  # a path of a web server is as good a stream as none
    assert (found.lines, found.size, found.time, stream, proposal.unit) == EXPECTED[kind]
    (feed,) = read_plan(proposal.settings, "proposed").feeds
    assert feed.follow == ("logs/a-*.log",)
    assert (feed.format.lines, feed.format.size, feed.format.time) == (found.lines, found.size, found.time)
    header = data.partition(b"\n")[0]
    parsed = compile_parser(feed.format).parse(data, header=header, first=True)
    assert parsed.sizes.size == 1500
    assert not proposal.rejected


def test_numbers_that_are_no_sizes_are_refused_with_the_reason() -> None:
    proposal = of(log("json"))
    why = {refused.field: refused.why for refused in proposal.not_sizes}
    assert why == {
        "placed_at": "holds times",
        "port": "its name says a port",
        "lat": "its name says a place on earth",
        "status": "its name says a status or a code",
    }


def test_look_alikes_without_a_telling_name_are_refused_by_their_values() -> None:
    rng = random.Random(1)
    rows = [
        {
            "a": i, "b": rng.uniform(-80, 80), "c": rng.random(), "d": rng.choice([200, 301, 404, 500, 502, 503]),
            "e": 1_793_000_000 + 10 * i, "w": 3 * rng.paretovariate(1.5),
        }
        for i in range(400)
    ]  # fmt: skip
    proposal = of(records(*rows))
    assert proposal.format.size == "w"
    assert {n.field for n in proposal.not_sizes} == {"a", "b", "c", "d", "e"}
    assert (proposal.format.time, proposal.format.time_unit) == ("e", "s")


def test_whole_sizes_are_a_doubt_and_never_decided() -> None:
    whole = of(log("number"))
    assert 'counting = "measured"' in whole.settings
    assert "decides nothing" in doubts(whole)


def test_a_duration_dated_by_its_start_is_noticed() -> None:
    assert "ts looks like the start of the event: with duration_s (in s)" in doubts(of(log("pairs")))


def test_a_duration_between_two_times_gives_the_unit() -> None:
    rng = random.Random(2)
    rows = []
    for i in range(300):
        minutes = 3 * rng.paretovariate(1.3)
        rows.append(
            {"from": stamp(900 * i), "to": stamp(900 * i + 60 * minutes), "outage": round(minutes, 2), "line": "a"}
        )
    proposal = of(records(*rows))
    assert (proposal.format.size, proposal.unit) == ("outage", "min")
    assert "the size is a duration (to minus from)" in doubts(proposal)


def test_parts_of_orders_are_told_from_orders() -> None:
    rng = random.Random(3)
    rows = [{"order_id": f"o{i // 3}", "at": stamp(i), "units": 4 * rng.paretovariate(1.4)} for i in range(600)]
    assert "order_id repeats on neighbouring lines: 600 lines, 200 different" in doubts(of(records(*rows)))
    apart = [{**row, "order_id": f"o{i % 200}"} for i, row in enumerate(rows)]  # the same customers again and again
    assert "repeats" not in doubts(of(records(*apart)))


def test_returns_zeros_and_rejected_lines_are_told_with_samples() -> None:
    rng = random.Random(4)
    rows = [{"at": stamp(i), "units": 4 * rng.paretovariate(1.4) * (-1 if i % 10 == 0 else 1)} for i in range(500)]
    proposal = of(records(*rows) + b'{"at": "x", "units": 3}\n{"units": 0, "at": "2026-11-01T00:00:00Z"}\n')
    assert "50 of 502 sizes are negative" in doubts(proposal)
    assert "1 of 502 sizes are zero" in doubts(proposal)
    assert proposal.rejected == {"negative": 50, "no usable time": 1, "zero": 1}
    assert {sample.reason for sample in proposal.samples} == {"negative", "no usable time", "zero"}
    assert "no usable time" in proposal.settings


def test_local_stamps_are_a_doubt_about_the_zone() -> None:
    assert "paid_at does not say its time zone" in doubts(of(log("csv")))
    assert "time zone" not in doubts(of(log("json")))


def test_a_date_apart_from_its_time_of_day_is_told() -> None:
    rng = random.Random(12)
    rows = [
        f"2026-11-{1 + i // 40:02d},{i % 24:02d}:{i % 60:02d}:00,{5 * rng.paretovariate(1.4):.2f}" for i in range(400)
    ]
    proposal = of("\n".join(["day,hour,weight_kg", *rows, ""]).encode())
    assert (proposal.format.time, proposal.unit) == ("day", "kg")
    assert "the time of day stands in hour" in doubts(proposal)


def test_two_likely_sizes_are_a_doubt() -> None:
    rng = random.Random(5)
    rows = [{"weight": 3 * rng.paretovariate(1.5), "amount": 9 * rng.paretovariate(1.5)} for _ in range(300)]
    proposal = of(records(*rows))
    assert "which field is the size" in doubts(proposal)
    assert {c.field for c in proposal.sizes} == {"weight", "amount"}


def test_currencies_do_not_mix() -> None:
    rng = random.Random(6)
    rows = [{"amount": 3 * rng.paretovariate(1.5), "currency": rng.choice(["EUR", "USD"])} for _ in range(300)]
    assert "sizes of different currencies do not compare" in doubts(of(records(*rows)))


def test_lines_of_several_kinds_get_a_condition() -> None:
    rng = random.Random(7)
    rows: list[dict[str, object]] = []
    for i in range(600):
        order = i % 3 == 0
        rows.append(
            {
                "kind": "order" if order else "login",
                "at": stamp(i),
                **({"units": 5 * rng.paretovariate(1.4)} if order else {}),
            }
        )
    proposal = of(records(*rows))
    assert proposal.format.where == (("kind", ("order",)),)
    assert (proposal.rejected, proposal.skipped) == ({}, {"condition": 400})
    assert read_plan(proposal.settings, "p").feeds[0].format.where == proposal.format.where


def test_tables_of_counts_and_sorted_lists_are_told_from_logs() -> None:
    counts = of(b"minutes_late,flights\n" + b"".join(b"%d,%d\n" % (i, 9000 // i) for i in range(1, 200)))
    assert "each minutes_late stands on one line, in order" in doubts(counts)
    assert "the sizes stand sorted" in doubts(of(b"hours\n" + b"".join(b"%d\n" % i**2 for i in range(1, 200))))
    assert "sorted" not in doubts(of(log("number")))


@pytest.mark.parametrize(
    ("path", "name"),
    [
        ("logs/orders-2026-11-01.jsonl", "orders"),
        ("/var/log/access.log.2.gz", "access"),
        ("claims_2024_lisbon.csv", "claims-lisbon"),
        ("-", "events"),
        ("\x1b[2J.csv", "j"),
        ("20261101.csv", "events"),
    ],
)
def test_feeds_are_named_after_their_files(path: str, name: str) -> None:
    assert feed_name(path) == name


@pytest.mark.parametrize(
    ("row", "words"),
    [
        ({"amount": "12.50"}, "stand in quotes"),
        ({"amount": "1.234,50"}, "decimal comma"),
        ({"took": "12ms"}, "carry their unit (ms)"),
    ],
)
def test_numbers_that_cannot_be_read_are_explained(row: dict[str, str], words: str) -> None:
    rows = [{**row, "seen": 3.5 * (i % 50) ** 2 + 1} for i in range(100)]
    proposal = of(records(*rows))
    assert words in proposal.settings.replace("\n#   ", " ")


@pytest.mark.parametrize(
    ("data", "words"),
    [
        (b"", "no readable line"),
        (b"\n\n\xff\xfe\n", "no readable line"),
        (b"hello\nworld\n", "no form with a number"),
        (b"[\n  {\n", "one JSON document over many lines"),
        (b'{"a": "x"}\n' * 50, "no field can be a size"),
        (b'{"status": 200, "id": 3}\n' * 50, "status: its name says a status or a code"),
    ],
)
def test_what_holds_no_size_is_refused_with_what_was_seen(data: bytes, words: str) -> None:
    with pytest.raises(DataError, match=r"logs/a-2026-11-01\.log: ") as caught:
        of(data)
    assert words in str(caught.value)


def test_the_rate_is_that_of_the_whole_log() -> None:
    data = log("json", 3000)  # one event in 30 s: 2880 a day
    lines = data.splitlines(keepends=True)
    head, end = b"".join(lines[:200]), b"".join(lines[-200:])
    pieces = (Piece(offset=0, data=head), Piece(offset=len(data) - len(end), data=end))
    proposal = propose((FileSample(name="a", pieces=pieces, size=len(data)),), ("a",))
    rates = [stream.events_per_day for stream in proposal.streams]
    assert sum(rate or 0 for rate in rates) == pytest.approx(2880, rel=0.02)
    unknown = propose((FileSample(name="a", pieces=pieces, size=None),), ("a",))
    assert sum(stream.events_per_day or 0 for stream in unknown.streams) == pytest.approx(2880, rel=0.05)


def test_a_slow_log_gets_a_long_window_and_is_told_when_none_is_long_enough() -> None:
    rng = random.Random(8)
    rows = [{"day": stamp(200_000 * i), "loss": 5 * rng.paretovariate(1.4)} for i in range(200)]
    proposal = of(records(*rows))
    assert (proposal.pane, proposal.window) == ("1d", "365d")
    assert "so none comes" in proposal.streams[0].words


def test_lateness_covers_the_disorder() -> None:
    rng = random.Random(9)
    rows = [
        {"at": stamp(max(0, 60 * i - rng.randrange(1500))), "units": 5 * rng.paretovariate(1.4)} for i in range(500)
    ]
    assert of(records(*rows)).lateness == "30m"


HOSTILE = "\u202e']\x7f\x9b2J\u2028[feed.x] = #\u200b"
VERY_HOSTILE = '\x1b[2J"]\n[feed.x]\nfollow = ["/etc/passwd"]\x00\\'


def test_hostile_names_and_values_are_harmless_and_exact() -> None:
    rng = random.Random(10)
    rows = [
        {HOSTILE: 5 * rng.paretovariate(1.4), f"{HOSTILE}.dock": rng.choice(["a", "b"]), "t": VERY_HOSTILE}
        for _ in range(200)
    ]
    bad = json.dumps({HOSTILE: VERY_HOSTILE, VERY_HOSTILE: 1}).encode() + b"\n"
    proposal = of(records(*rows) + bad, name=VERY_HOSTILE)
    (feed,) = read_plan(proposal.settings, "p").feeds
    assert feed.format.size == HOSTILE.replace(".", "\\.")
    assert compile_parser(feed.format).parse(records(*rows)).sizes.size == 200
    harmless(proposal.settings)
    assert len(read_plan(proposal.settings, "p").feeds) == 1


def harmless(text: str) -> None:
    assert all(line.isprintable() for line in text.split("\n"))


@given(st.text())
def test_quoting_is_exact(text: str) -> None:
    assert tomllib.loads(f"{key(text)} = {quoted(text)}") == {text: text}
    harmless(quoted(text))


@given(st.text(), st.integers(40, 120))
def test_comments_stay_comments(text: str, width: int) -> None:
    lines = comment(text, width)
    assert all(line.startswith("#") and "\n" not in line for line in lines)
    harmless("\n".join(lines))


_NAMES = st.text(min_size=1, max_size=12)
_VALUES = st.one_of(
    st.text(max_size=20), st.integers(), st.floats(allow_nan=False, allow_infinity=False), st.booleans(), st.none(),
    st.lists(st.integers(), max_size=2), st.dictionaries(_NAMES, st.integers(1, 10**6), max_size=2),
)  # fmt: skip


@settings(max_examples=150, deadline=None)
@given(st.lists(st.dictionaries(_NAMES, _VALUES, max_size=6), min_size=1, max_size=30))
def test_any_json_gives_valid_settings_or_a_sentence(rows: list[dict[str, object]]) -> None:
    valid_or_refused(records(*rows))


_LINES = st.lists(st.text("0123456789.,;=|\t \"'[]-:abT\n\x1b", max_size=40), max_size=30)


@settings(max_examples=300, deadline=None)
@given(
    st.one_of(
        st.binary(max_size=400),
        st.lists(st.text("0123456789.,;=|\t \"'[]-:abT\n\x1b", max_size=40), max_size=30).map(
            lambda t: "\n".join(t).encode()
        ),
    )
)
def test_any_bytes_give_valid_settings_or_a_sentence(data: bytes) -> None:
    valid_or_refused(data + b"\n")


def valid_or_refused(data: bytes) -> None:
    try:
        proposal = of(data)
    except DataError as error:
        harmless(str(error))
        return
    read_plan(proposal.settings, "p")
    harmless(proposal.settings)
