"""A notice as a syslog message (RFC 5424), over UDP (RFC 5426), TCP with octet counting (RFC 6587) or a local socket.

None of these ways gives an answer: "delivered" means sent. Section numbers below are of RFC 5424.
"""

from __future__ import annotations

import re
from base64 import b64encode

import msgspec

from monitor.deliver import network
from monitor.deliver.cloudevent import TYPE_PREFIX, CloudEvent
from monitor.deliver.route import Sending
from monitor.plan.receivers import SyslogWay

SEVERITIES = {"high": 2, "medium": 4, "low": 5}
"""Critical, warning, notice (table 2), for alarms that are raised; everything else is informational."""
INFORMATIONAL = 6
MOST_BYTES = 2048
"""What every receiver should take (section 6.1)."""
MOST_VALUE = 200
"""Characters of a structured value: the names of streams come from logs."""
ENTERPRISE = 32473
"""The number reserved for examples (RFC 5612): this project has none of its own, and names need one (section 7.2.2)."""
_BOM = "\ufeff"


class Sender(msgspec.Struct, frozen=True, kw_only=True):
    """What messages say of their sender: host name, process id, and facility (table 1)."""

    host: str
    process: int
    facility: int


def syslog_message(event: CloudEvent, sender: Sender) -> bytes:
    """One message: header, structured data, and the notice's sentence in UTF-8 behind a byte order mark."""
    kind = event.type.removeprefix(TYPE_PREFIX)
    alarm = event.data.get("alarm", {})
    raised = kind in ("raised", "raised-again", "reminder")
    severity = SEVERITIES.get(str(alarm.get("priority")), 5) if raised else INFORMATIONAL
    header = " ".join(
        (
            f"<{8 * sender.facility + severity}>1", _stamp(event.time), _word(sender.host, 255), "tailgauge",
            str(sender.process), _word(kind, 32),
        )
    )  # fmt: skip
    values = {
        "id": event.id, "alarm": alarm.get("id"), "stream": event.subject, "rule": alarm.get("rule"),
        "state": alarm.get("state"), "priority": alarm.get("priority"),
    }  # fmt: skip
    pairs = "".join(f' {name}="{_value(str(value))}"' for name, value in values.items() if value is not None)
    head = f"{header} [tailgauge@{ENTERPRISE}{pairs}] {_BOM}".encode()
    return head + _cut(_flat(str(event.data.get("text", kind))).encode(), MOST_BYTES - len(head))


def _stamp(time: str) -> str:
    """At most six decimals of a second (section 6.2.3)."""
    return re.sub(r"(\.[0-9]{6})[0-9]+", r"\1", time)


def _word(text: str, most: int) -> str:
    """Visible ASCII of bounded length, '-' for nothing (section 6)."""
    return re.sub(r"[^!-~]", "?", text)[:most] or "-"


def _flat(text: str) -> str:
    """Without control characters: a name with a line end in it must not begin a message of its own."""
    return re.sub(r"[\x00-\x1f\x7f-\x9f\u2028\u2029]", " ", text)


def _value(text: str) -> str:
    """A value with '"', '\\' and ']' escaped (section 6.3.3)."""
    return re.sub(r'(["\\\]])', r"\\\1", _flat(text)[:MOST_VALUE])


def _cut(text: bytes, most: int) -> bytes:
    """The text, cut between characters."""
    if len(text) <= most:
        return text
    return text[: most - 2].decode("utf-8", "ignore").encode() + b".."


class SyslogRoute:
    """Sends each notice to one syslog receiver. Parameters: host and process, of this sender; timeout, seconds."""

    def __init__(self, way: SyslogWay, *, host: str, process: int, timeout: float) -> None:
        self._way = way
        self._sender = Sender(host=host, process=process, facility=way.facility)
        self._timeout = timeout

    def send(self, event: CloudEvent, real: float) -> Sending:
        """Start sending."""
        task = {
            "kind": "syslog", "transport": self._way.transport, "host": self._way.host, "port": self._way.port,
            "message": b64encode(syslog_message(event, self._sender)).decode(),
        }  # fmt: skip
        place = f"{self._way.host}:{self._way.port}" if self._way.port else self._way.host
        return network.start(task, f"{self._way.transport} {place}", self._timeout, real)
