"""Back-off, receipts, and the courier with routes that are mere lists."""

from __future__ import annotations

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.deliver.cloudevent import CloudEvent
from monitor.deliver.command import CommandRoute
from monitor.deliver.courier import Courier, Host, route_of
from monitor.deliver.post import PostRoute
from monitor.deliver.route import Backoff, Receipt, delivered, failed, next_try, one_line, wait_before
from monitor.deliver.syslog import SyslogRoute
from monitor.plan import read_plan
from tests.deliver.ways import event
from tests.plan.test_receivers import BASE


@settings(max_examples=200, deadline=None, derandomize=True)
@given(st.text(), st.integers(1, 200))
def test_waits_double_up_to_the_longest_and_are_spread_a_little(notice: str, tries: int) -> None:
    wait = wait_before(notice, tries, Backoff(first=10.0, last=3600.0))
    plain = min(3600.0, 10.0 * 2.0 ** (tries - 1))
    assert 0.9 * plain <= wait <= 1.1 * plain
    assert wait == wait_before(notice, tries, Backoff(first=10.0, last=3600.0))


def test_notices_to_one_receiver_do_not_come_back_all_at_once() -> None:
    waits = {wait_before(str(n), 3, Backoff()) for n in range(100)}
    assert len(waits) == 100
    assert max(waits) - min(waits) > 0.1 * 40.0


def test_it_is_given_up_in_the_end() -> None:
    backoff = Backoff(first=10.0, last=60.0, give_up=1000.0)
    assert next_try("n", 1, 0.0, backoff) == wait_before("n", 1, backoff)
    assert next_try("n", 20, 930.0, backoff) is not None
    assert next_try("n", 20, 999.0, backoff) is None


def test_details_are_one_bounded_line() -> None:
    assert one_line(" a\n\nb\t c ") == "a b c"
    long = one_line("start " + "x" * 5000 + " end")
    assert len(long) <= 500
    assert long.startswith("start ")
    assert long.endswith(" end")


class Listed:
    """A route whose tries end with the receipts of a list, one a poll; None: not yet."""

    def __init__(self, *receipts: Receipt | None) -> None:
        self.receipts = list(receipts)
        self.sent: list[str] = []
        self.stopped = 0

    def send(self, event: CloudEvent, real: float) -> Listed:
        self.sent.append(event.id)
        return self

    def poll(self, real: float) -> Receipt | None:
        return self.receipts.pop(0)

    def stop(self) -> None:
        self.stopped += 1


def test_a_receiver_s_failure_is_told_once_and_so_is_its_end() -> None:
    route = Listed(failed("down"), failed("down"), failed("down still"), delivered("ok"), delivered("ok"), failed("x"))
    courier = Courier({"desk": route})
    told = []
    for n in range(6):
        courier.send(str(n), "desk", event(), 0.0)
        told += [delivery.tell for delivery in courier.poll(0.0)]
    assert told == [
        "notify.desk: could not deliver: down. It is tried again, more and more rarely.",
        None,
        None,
        "notify.desk: reached again",
        None,
        "notify.desk: could not deliver: x. It is tried again, more and more rarely.",
    ]


def test_one_at_a_time_for_a_receiver_and_so_many_in_all() -> None:
    routes = {name: Listed(None, delivered("ok")) for name in "abc"}
    courier = Courier(routes, at_once=2)
    courier.send("1", "a", event(), 0.0)
    assert not courier.free("a")
    courier.send("2", "b", event(), 0.0)
    assert not courier.free("c")
    assert not courier.free("unknown")
    assert courier.poll(0.0) == []
    assert [delivery.notice for delivery in courier.poll(0.0)] == ["1", "2"]
    assert courier.free("c")
    assert not courier.busy


def test_stopping_ends_what_is_under_way() -> None:
    route = Listed(None)
    courier = Courier({"a": route})
    courier.send("1", "a", event(), 0.0)
    courier.stop()
    assert route.stopped == 1
    assert not courier.busy


@pytest.mark.parametrize(
    ("lines", "kind"),
    [
        ('command = ["x"]', CommandRoute),
        ('post = "https://desk.example.com/"', PostRoute),
        ('syslog = "udp://logs.example.com"', SyslogRoute),
    ],
)
def test_each_way_of_the_plan_has_its_route(lines: str, kind: type, tmp_path) -> None:  # type: ignore[no-untyped-def]
    receiver = read_plan(f"{BASE}[notify.desk]\n{lines}", "w").receivers[0]
    assert isinstance(route_of(receiver, Host(name="h", process=1, folder=tmp_path)), kind)
