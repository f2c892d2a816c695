"""What every way out has in common: a route starts sending, is polled until it gives a receipt, and retries back off.

Nothing waits: network sends run in a small child process, since looking a name up or setting up TLS would block.
`real` is the caller's monotonic clock in seconds; nothing here reads a clock.
"""

from __future__ import annotations

from hashlib import blake2b
from typing import Literal, Protocol

import msgspec

from monitor.deliver.cloudevent import CloudEvent

MOST_DETAIL = 500
"""Characters of a receipt's detail."""


class Receipt(msgspec.Struct, frozen=True, kw_only=True):
    """How one try ended. `detail` says in words what came back, never anything of a secret."""

    result: Literal["delivered", "failed"]
    detail: str

    @property
    def delivered(self) -> bool:
        """It arrived, as far as this way can know."""
        return self.result == "delivered"


class Sending(Protocol):
    """One try under way."""

    def poll(self, real: float) -> Receipt | None:
        """The receipt, once there is one; never waits. After its time-out a try has failed."""
        ...

    def stop(self) -> None:
        """Give up at once and leave nothing behind."""
        ...


class Route(Protocol):
    """A way to one receiver."""

    def send(self, event: CloudEvent, real: float) -> Sending:
        """Start a try. Never raises for what a receiver or the settings can cause: that becomes a failed receipt."""
        ...


class Ended:
    """A try that ended before it began."""

    def __init__(self, detail: str) -> None:
        self._receipt = failed(detail)

    def poll(self, real: float) -> Receipt | None:
        """The receipt."""
        del real
        return self._receipt

    def stop(self) -> None:
        """Nothing is left to stop."""


def failed(detail: str) -> Receipt:
    """A receipt of failure, its detail of bounded length and on one line."""
    return Receipt(result="failed", detail=one_line(detail))


def delivered(detail: str) -> Receipt:
    """A receipt of success."""
    return Receipt(result="delivered", detail=one_line(detail))


def one_line(text: str) -> str:
    """The text on one line, cut to a bounded length in its middle: beginning and end tell most."""
    flat = " ".join(text.split())
    if len(flat) <= MOST_DETAIL:
        return flat
    half = MOST_DETAIL // 2 - 2
    return f"{flat[:half]} .. {flat[-half:]}"


class Backoff(msgspec.Struct, frozen=True, kw_only=True):
    """When to try again, seconds: doubling from `first` to `last`, given up `give_up` after the first try."""

    first: float = 10.0
    last: float = 3600.0
    give_up: float = 7 * 86_400.0


def wait_before(notice: str, tries: int, backoff: Backoff) -> float:
    """Seconds between try number `tries` (the first is 1) and the next.

    Spread over +-10 % by a digest of notice and try, so that many notices to a receiver that was down do not come back
    all at once; the same notice always waits the same times.
    """
    plain = min(backoff.last, backoff.first * 2.0 ** min(tries - 1, 60))
    digest = blake2b(f"{notice} {tries}".encode(), digest_size=4).digest()
    return plain * (0.9 + 0.2 * int.from_bytes(digest, "big") / 2**32)


def next_try(notice: str, tries: int, since_first: float, backoff: Backoff) -> float | None:
    """Seconds from the failed try number `tries` to the next one, or None when it is given up.

    Parameters: since_first, seconds between the first try and this one.
    """
    wait = wait_before(notice, tries, backoff)
    return wait if since_first + wait <= backoff.give_up else None
