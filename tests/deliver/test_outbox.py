"""The outbox: retries until delivered, order, crash in between, receivers that are gone; with lists for routes."""

from __future__ import annotations

import sys
import time
from pathlib import Path

import msgspec
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.deliver.cloudevent import CloudEvent
from monitor.deliver.command import CommandRoute
from monitor.deliver.courier import Courier
from monitor.deliver.outbox import SECOND, Outbox
from monitor.deliver.route import Backoff, delivered, failed, wait_before
from storage.errands import ErrandStood
from tests.deliver.test_route import Listed
from tests.deliver.ways import event

BACKOFF = Backoff(first=10.0, last=60.0, give_up=100.0)


def errand(notice: str, at: int = 0, receiver: str = "desk", due: int = 0) -> ErrandStood:
    return ErrandStood(notice=notice, alarm="x", receiver=receiver, at=at, due=due, known_at=0)


def event_of(notice: str) -> CloudEvent | None:
    return None if notice == "gone" else msgspec.structs.replace(event(), id=notice)


def outbox(route: Listed, *errands: ErrandStood) -> Outbox:
    made = Outbox(Courier({"desk": route}), BACKOFF)
    made.queue(errands)
    return made


def test_a_notice_is_tried_again_until_it_arrives() -> None:
    box = outbox(Listed(failed("down"), delivered("ok")), errand("n"))
    assert box.turn(0, 0.0, event_of).changed == ()
    first = box.turn(SECOND, 0.0, event_of)
    wait = round(wait_before("n", 1, BACKOFF) * SECOND)
    assert [(one.state, one.tries, one.first_try, one.due) for one in first.changed] == [
        ("waiting", 1, SECOND, SECOND + wait)
    ]
    assert first.tell[0].startswith("notify.desk: could not deliver: down")
    assert box.next_due() == SECOND + wait
    assert not box.busy
    box.turn(SECOND + wait - 1, 0.0, event_of)
    assert not box.busy
    box.turn(SECOND + wait, 0.0, event_of)
    assert box.busy
    last = box.turn(SECOND + wait, 0.0, event_of)
    assert [(one.state, one.tries, one.detail) for one in last.changed] == [("delivered", 2, "ok")]
    assert last.tell == ("notify.desk: reached again",)
    assert box.waiting == ()
    assert box.next_due() is None


def test_it_is_given_up_after_the_time_for_that_and_told() -> None:
    box = outbox(Listed(*[failed("down")] * 50), errand("n"))
    now, told, changed = 0, [], []
    while box.waiting and now < 1000 * SECOND:
        turned = box.turn(now, 0.0, event_of)
        told += turned.tell
        changed += turned.changed
        now += SECOND
    assert changed[-1].state == "given up"
    assert changed[-1].ended_at is not None
    assert changed[-1].ended_at <= 110 * SECOND
    assert len(told) == 2
    assert told[-1] == f"notify.desk: a notice is given up after {changed[-1].tries} tries"


def test_what_can_never_be_sent_is_given_up_at_once() -> None:
    box = outbox(Listed(), errand("gone"), errand("n", receiver="left"))
    details = {one.notice: (one.state, one.detail) for one in box.turn(5, 0.0, event_of).changed}
    assert details == {
        "gone": ("given up", "the notice is no longer in the store"),
        "n": ("given up", "the settings no longer name this receiver"),
    }
    assert box.waiting == ()


def test_notices_go_out_in_the_order_of_what_they_speak_of() -> None:
    route = Listed(*[delivered("ok")] * 3)
    box = outbox(route, errand("late", at=30), errand("early", at=10), errand("middle", at=20))
    for _ in range(6):
        box.turn(100, 0.0, event_of)
    assert route.sent == ["early", "middle", "late"]


def test_a_crash_before_the_commit_sends_the_same_notice_again() -> None:
    route = Listed(delivered("ok"), delivered("ok"))
    stored = errand("n")
    box = outbox(route, stored)
    box.turn(0, 0.0, event_of)
    assert box.turn(0, 0.0, event_of).changed[0].state == "delivered"
    # Killed here: the store still says that it waits.
    again = outbox(route, stored)
    again.turn(0, 0.0, event_of)
    assert route.sent == ["n", "n"]


def test_stopping_leaves_errands_waiting() -> None:
    route = Listed(None)
    box = outbox(route, errand("n"))
    box.turn(0, 0.0, event_of)
    box.stop()
    assert route.stopped == 1
    assert [one.notice for one in box.waiting] == ["n"]


def test_what_is_overtaken_under_way_is_not_revived() -> None:
    route = Listed(None, delivered("ok"))
    box = outbox(route, errand("n"))
    box.turn(0, 0.0, event_of)
    box.queue([msgspec.structs.replace(errand("n"), state="overtaken")])
    box.turn(1, 0.0, event_of)
    assert box.turn(1, 0.0, event_of).changed == ()


@settings(max_examples=100, deadline=None, derandomize=True)
@given(results=st.lists(st.booleans(), max_size=30), count=st.integers(1, 6))
def test_every_errand_ends_and_none_is_lost(results: list[bool], count: int) -> None:
    receipts = [delivered("ok") if good else failed("down") for good in results]
    box = outbox(Listed(*receipts, *[delivered("ok")] * 10 * count), *(errand(str(n), at=n) for n in range(count)))
    ended: dict[str, str] = {}
    now = 0
    while box.waiting:
        for one in box.turn(now, 0.0, event_of).changed:
            if one.state != "waiting":
                assert one.notice not in ended
                ended[one.notice] = one.state
        now += SECOND
        assert now < 10_000 * SECOND
    assert set(ended) == {str(n) for n in range(count)}


def test_a_real_program_that_fails_at_first_gets_the_same_event_until_it_takes_it(tmp_path: Path) -> None:
    script = tmp_path / "page"
    script.write_text(
        f"#!{sys.executable} -IS\nimport sys\nlog = open('log', 'ab')\nlog.write(sys.stdin.buffer.read() + b'\\n')\n"
        "log.close()\n"
        "sys.exit(0 if len(open('log', 'rb').readlines()) > 2 else 75)\n"
    )
    script.chmod(0o700)
    route = CommandRoute(["./page"], folder=tmp_path, timeout=20.0)
    box = Outbox(Courier({"desk": route}), Backoff(first=0.01, last=0.01))
    box.queue([errand("n")])
    told: list[str] = []
    end = time.monotonic() + 30.0
    while box.waiting and time.monotonic() < end:
        told += box.turn(time.time_ns(), time.monotonic(), event_of).tell
        time.sleep(0.005)
    assert box.waiting == ()
    lines = (tmp_path / "log").read_bytes().splitlines()
    assert len(lines) == 3
    assert len(set(lines)) == 1
    assert [line.partition(":")[0] for line in told] == ["notify.desk", "notify.desk"]
