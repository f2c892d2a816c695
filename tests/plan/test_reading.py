"""Settings: what is understood, and each refusal with key, expectation and way out."""

from __future__ import annotations

import pytest

from monitor.errors import SettingsError
from monitor.plan import STARTER, read_plan
from monitor.plan.spans import DAY, SECOND, parse_span, span_text

FULL = """
store = "orders.db"
[feed.orders]
follow = ["logs/orders-*.jsonl"]
lines = "json"
size = "units"
time = "placed_at"
stream = ["site", "dock"]
unit = "units"
where = { kind = ["order", "rush"], urgent = true }
[watch]
pane = "1h"
window = "14d"
limit = 6000
limit_at_most = "1 per 30d"
one_in = [1000, 10000]
timezone = "Europe/Lisbon"
false_alarm_every = "90d"
[stream."north-*"]
limit = 9000
window = "7d"
[stream."north-dock"]
unit = "pallets"
[stream."north-dock".plan]
alpha = 2.5
xmin = 120
[[known]]
from = 2026-11-27
to = 2026-11-30
reason = "autumn promotion"
[notify.desk]
command = ["./page-the-desk"]
"""


def test_everything_of_a_full_file_is_understood() -> None:
    plan = read_plan(FULL, "t")
    (feed,) = plan.feeds
    assert feed.format.stream == ("site", "dock")
    assert feed.format.where == (("kind", ("order", "rush")), ("urgent", ("true",)))
    assert plan.pane == 3600 * SECOND
    assert plan.everywhere.one_in == (1000, 10000)
    assert plan.everywhere.limit_at_most is not None
    assert plan.everywhere.limit_at_most.period == 30 * DAY
    assert plan.known[0].start == 1_795_737_600 * SECOND  # 2026-11-27 00:00 in Lisbon, which is UTC in winter
    assert plan.everywhere.false_alarm_every == 90 * DAY


def test_the_longest_match_wins() -> None:
    plan = read_plan(FULL, "t")
    dock = plan.stream("north-dock", "units")
    assert (dock.limit, dock.window, dock.unit) == (9000, 7 * DAY, "pallets")
    assert dock.planned is not None
    assert (dock.planned.alpha, dock.planned.xmin) == (2.5, 120)
    assert plan.stream("north-yard", "units").planned is None
    assert plan.stream("south-dock", "units").limit == 6000


def test_the_digest_names_the_text() -> None:
    assert read_plan(FULL, "a").digest == read_plan(FULL, "b").digest != read_plan(STARTER, "a").digest


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ('size = "units"', 'sise = "units"', 'feed.orders.sise: unknown key. Did you mean "size"?'),
        ("[watch]", "[wach]", 'wach: unknown key. Did you mean "watch"?'),
        ("limit = 9000", "limt = 9000", 'stream."north-*".limt: unknown key. Did you mean "limit"?'),
        ("alpha = 2.5", "alfa = 2.5", 'stream.north-dock.plan.alfa: unknown key. Did you mean "alpha"?'),
        ("alpha = 2.5", "alpha = 1.0", 'stream."north-dock".plan.alpha: 1.0 is out of range; expected more than 1'),
        ("limit = 6000", "limit = 0", "watch.limit: 0.0 is out of range; expected more than 0"),
        ('window = "14d"', 'window = "90m"', 'watch.window: "90m" is not a whole number of panes'),
        ('window = "14d"', 'window = "fortnight"', 'watch.window: "fortnight" is not a span of time'),
        ('"1 per 30d"', '"monthly"', 'watch.limit_at_most: "monthly" is not understood; expected such as "1 per 30d"'),
        ("one_in = [1000, 10000]", "one_in = []", "watch.one_in: expected a number of events"),
        ('timezone = "Europe/Lisbon"', 'timezone = "Lisboa"', 'watch.timezone: "Lisboa" is no known time zone'),
        ('follow = ["logs/orders-*.jsonl"]', "", "feed.orders: expected exactly one of follow"),
        ('follow = ["logs/orders-*.jsonl"]', 'listen = "udp://127.0.0.1:7071"', "is no address to listen on"),
        ('follow = ["logs/orders-*.jsonl"]', 'listen = "tcp://0.0.0.0:7071"', "0.0.0.0 can be reached from other mach"),
        ('follow = ["logs/orders-*.jsonl"]', 'listen = "http://me:7071"', "'me' is no numeric address"),
        ('follow = ["logs/orders-*.jsonl"]', 'listen = "http://[::1]:70710"', "is no address to listen on"),
        ('unit = "units"', 'listen = "unix:///a.sock"', "found follow and listen"),
        ("to = 2026-11-30", "to = 2026-11-27", "known[0].to: is not after from"),
        ('store = "orders.db"', "", "settings: object missing required field `store`"),
        ('lines = "json"', 'lines = 3', "feed.orders.lines: expected `str`, got `int`"),
        ('reason = "autumn promotion"', 'reason = "x"\neffect = "ignore"', 'known[0].effect: "ignore" is none of'),
    ],
)  # fmt: skip
def test_refusals_name_the_key_and_what_was_expected(old: str, new: str, message: str) -> None:
    assert old in FULL
    with pytest.raises(SettingsError) as caught:
        read_plan(FULL.replace(old, new, 1), "watch.toml")
    text = str(caught.value)
    assert text.startswith("watch.toml: ")
    assert message in text


@pytest.mark.parametrize(
    ("text", "ns"),
    [("90s", 90 * SECOND), ("1h", 3600 * SECOND), ("14d", 14 * DAY), ("2w", 14 * DAY), ("5 m", 300 * SECOND)],
)
def test_spans(text: str, ns: int) -> None:
    assert parse_span(text) == ns
    assert parse_span(span_text(ns)) == ns


@pytest.mark.parametrize("text", ["", "h", "1.5h", "-1h", "1y", "1h30m", "٣h"])
def test_what_is_no_span(text: str) -> None:
    assert parse_span(text) is None


@pytest.mark.parametrize(
    ("text", "scheme", "host", "port", "path"),
    [
        ("http://127.0.0.1:7070", "http", "127.0.0.1", 7070, ""),
        ("tcp://[::1]:7071", "tcp", "::1", 7071, ""),
        ("http://localhost:80/", "http", "127.0.0.1", 80, ""),
        ("unix://run/a.sock", "unix", "", 0, "run/a.sock"),
        ("unix:///run/a.sock", "unix", "", 0, "/run/a.sock"),
    ],
)
def test_addresses_to_listen_on(text: str, scheme: str, host: str, port: int, path: str) -> None:
    plan = read_plan(FULL.replace('follow = ["logs/orders-*.jsonl"]', f'listen = "{text}"'), "t")
    listen = plan.feeds[0].listen
    assert listen is not None
    assert (listen.address, listen.scheme, listen.host, listen.port, listen.path) == (text, scheme, host, port, path)


def test_listening_beyond_the_machine_must_be_said() -> None:
    both = 'listen = "tcp://0.0.0.0:7071"\nlisten_beyond_loopback = true'
    plan = read_plan(FULL.replace('follow = ["logs/orders-*.jsonl"]', both), "t")
    assert plan.feeds[0].listen is not None
    assert plan.feeds[0].listen.host == "0.0.0.0"
