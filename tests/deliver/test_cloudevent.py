"""CloudEvents 1.0: required attributes, content modes, and what the specification's own example gives."""

from __future__ import annotations

import json
import re
from datetime import datetime
from urllib.parse import unquote

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.deliver.cloudevent import binary, cloud_event, from_structured, header_value, structured
from tests.deliver.ways import event


def test_the_json_format_holds_what_the_specification_requires() -> None:
    # CloudEvents 1.0.2, "Required attributes" and the JSON event format [from memory].
    found = json.loads(structured(event()))
    assert found["specversion"] == "1.0"
    for name in ("id", "source", "type"):
        assert found[name]
    assert found["datacontenttype"] == "application/json"
    assert isinstance(found["data"], dict)
    assert "data_base64" not in found
    assert all(re.fullmatch(r"[a-z0-9]{1,20}", name) for name in found)
    assert datetime.fromisoformat(found["time"]).tzinfo is not None


def test_the_same_notice_is_the_same_event_and_survives_its_document() -> None:
    assert event() == event()
    assert from_structured(structured(event())) == event()


@pytest.mark.parametrize(
    ("kind", "expected"), [("raised", "tailgauge.alarm.raised"), ("raised again", "tailgauge.alarm.raised-again")]
)
def test_types_are_names_of_our_own(kind: str, expected: str) -> None:
    assert cloud_event(notice="1", kind=kind, source="/s", stream="x", time="t", data={}).type == expected


def test_a_stream_s_name_may_hold_anything() -> None:
    found = cloud_event(notice="1", kind="raised", source="/s", stream="a\n\x00\ud800b", time="t", data={})
    assert found.subject == "a\ufffd\ufffd\ufffdb"
    json.loads(structured(found))


def test_binary_mode_puts_attributes_into_headers_and_data_into_the_body() -> None:
    headers, body = binary(event())
    assert json.loads(body) == event().data
    assert headers["Content-Type"] == "application/json"
    assert headers["ce-specversion"] == "1.0"
    assert headers["ce-subject"] == "north-dock"
    assert "ce-datacontenttype" not in headers


def test_header_values_are_encoded_as_in_the_specification_s_example() -> None:
    # CloudEvents HTTP protocol binding 1.0.2, section 3.1.3.2 [from memory].
    assert header_value("Euro € 😀") == "Euro%20%E2%82%AC%20%F0%9F%98%80"
    assert header_value('a"b%c') == "a%22b%25c"


@settings(max_examples=200, deadline=None, derandomize=True)
@given(st.text())
def test_header_values_are_visible_ascii_and_can_be_read_back(text: str) -> None:
    encoded = header_value(text)
    assert re.fullmatch(r"[!-~]*", encoded)
    assert unquote(encoded) == text
