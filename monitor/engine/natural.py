"""Natural names and seeds: digests of what they are for, never counters in order of completion."""

from __future__ import annotations

from hashlib import blake2b


def natural_seed(settings_seed: int, *parts: object) -> int:
    """A seed below 2^53 that depends on what is drawn for, never on the order of completion."""
    text = "\n".join(str(part) for part in (settings_seed, *parts))
    return int.from_bytes(blake2b(text.encode(), digest_size=8).digest(), "big") >> 11


def natural_id(*parts: object) -> str:
    """A short name that equal content always gets: 12 bytes of BLAKE2b in hex."""
    return blake2b("\n".join(str(part) for part in parts).encode(), digest_size=12).hexdigest()
