"""A notice as a CloudEvent 1.0: the JSON that programs and HTTP receivers are given. Pure.

CloudEvents 1.0.2, its JSON event format and its HTTP protocol binding [from memory].
"""

from __future__ import annotations

import re
from typing import Any

import msgspec

SPEC_VERSION = "1.0"
TYPE_PREFIX = "tailgauge.alarm."
CONTENT_TYPE = "application/cloudevents+json; charset=UTF-8"
DATA_CONTENT_TYPE = "application/json"

# Not allowed in an attribute of type String (section "Type system"): controls, surrogates, noncharacters.
_BARRED = re.compile("[\x00-\x1f\x7f-\x9f\ud800-\udfff\ufdd0-\ufdef\ufffe\uffff]")


class CloudEvent(msgspec.Struct, frozen=True, kw_only=True):
    """One event. `source` and `id` together name it for good: a receiver that has seen them may drop it.

    type     such as "tailgauge.alarm.raised"
    time     RFC 3339 UTC: the moment the notice speaks of
    subject  the stream
    data     a JSON document
    """

    id: str
    source: str
    type: str
    time: str
    subject: str
    data: dict[str, Any]


def cloud_event(*, notice: str, kind: str, source: str, stream: str, time: str, data: dict[str, Any]) -> CloudEvent:
    """The event of a notice.

    Parameters: notice, its id; kind, such as "raised again"; source, a URI reference that names the store.
    """
    return CloudEvent(
        id=notice,
        source=source,
        type=TYPE_PREFIX + re.sub(r"[^a-z]+", "-", kind.lower()),
        time=time,
        subject=_BARRED.sub("\ufffd", stream) or "-",
        data=data,
    )


def structured(event: CloudEvent) -> bytes:
    """The whole event as one JSON document."""
    return msgspec.json.encode(
        {
            "specversion": SPEC_VERSION, "id": event.id, "source": event.source, "type": event.type,
            "time": event.time, "subject": event.subject, "datacontenttype": DATA_CONTENT_TYPE, "data": event.data,
        }
    )  # fmt: skip


def from_structured(text: bytes) -> CloudEvent:
    """The event of its JSON document; for the queue, which keeps that document."""
    return msgspec.json.decode(text, type=CloudEvent)


def binary(event: CloudEvent) -> tuple[dict[str, str], bytes]:
    """Headers and body of the binary content mode: the attributes go into headers, the data alone into the body."""
    attributes = {
        "specversion": SPEC_VERSION, "id": event.id, "source": event.source, "type": event.type, "time": event.time,
        "subject": event.subject,
    }  # fmt: skip
    headers = {f"ce-{name}": header_value(value) for name, value in attributes.items()}
    return {**headers, "Content-Type": DATA_CONTENT_TYPE}, msgspec.json.encode(event.data)


def header_value(text: str) -> str:
    """An attribute as a header's value: what is not plain visible ASCII is percent-encoded (HTTP binding 3.1.3.2)."""
    return "".join(
        char if "!" <= char <= "~" and char not in '"%' else "".join(f"%{byte:02X}" for byte in char.encode())
        for char in text
    )
