"""A notice as an HTTP POST, in one of the content modes of the CloudEvents HTTP binding.

TLS certificates are verified, redirects refused, proxies not used; an answer of 2xx means delivered.
"""

from __future__ import annotations

from base64 import b64encode
from pathlib import Path

from monitor.deliver import network
from monitor.deliver.cloudevent import CONTENT_TYPE, CloudEvent, binary, structured
from monitor.deliver.route import Sending
from monitor.plan.receivers import PostWay


class PostRoute:
    """POSTs each notice to one address.

    Parameters: folder, what relative paths of secret and certificates mean; timeout, seconds.
    """

    def __init__(self, way: PostWay, *, folder: Path, timeout: float) -> None:
        self._way = way
        self._folder = folder
        self._timeout = timeout

    def send(self, event: CloudEvent, real: float) -> Sending:
        """Start the request."""
        if self._way.mode == "binary":
            headers, body = binary(event)
        else:
            headers, body = {"Content-Type": CONTENT_TYPE}, structured(event)
        task = {
            "kind": "post", "address": self._way.address, "headers": {**headers, "User-Agent": "tailgauge"},
            "body": b64encode(body).decode(), "secret_header": self._way.secret_header,
            "secret_file": self._path(self._way.secret_file), "certificates": self._path(self._way.certificates),
        }  # fmt: skip
        # Whatever follows "?" may be a token; it is not repeated in messages.
        return network.start(task, self._way.address.partition("?")[0], self._timeout, real)

    def _path(self, name: str | None) -> str | None:
        return None if name is None else str(self._folder / name)
