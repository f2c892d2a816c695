"""An event to send, and waiting for a receipt with a bound."""

from __future__ import annotations

import time

from monitor.deliver.cloudevent import CloudEvent, cloud_event
from monitor.deliver.route import Receipt, Sending

MOST_SECONDS = 30.0


def event(**data: object) -> CloudEvent:
    alarm = {"id": "a1b2", "rule": "exponent", "state": "unacknowledged", "priority": "medium"}
    return cloud_event(
        notice="0123456789abcdef",
        kind="raised",
        source="/tailgauge/stores/x1",
        stream="north-dock",
        time="2026-12-01T14:05:00.1234567Z",
        data={"text": "north-dock: tail heavier.", "alarm": alarm, **data},
    )


def receipt(sending: Sending) -> Receipt:
    """The receipt of a try; fails when there is none in time."""
    end = time.monotonic() + MOST_SECONDS
    while time.monotonic() < end:
        found = sending.poll(time.monotonic())
        if found is not None:
            return found
        time.sleep(0.005)
    sending.stop()
    raise AssertionError("no receipt in time")
