"""Names and patterns made from the paths of the files."""

from __future__ import annotations

import re
from collections.abc import Sequence

from monitor.parse.lines import Field

_ENDINGS = re.compile(r"(\.(gz|jsonl|ndjson|json|csv|tsv|log|txt|out|data|old|\d+))+$", re.IGNORECASE)
_DATES = re.compile(r"[-_.]?\d[\d\-_.T:Z]*")
_SPECIAL = re.compile(r"([*?\[])")
_DIGITS = re.compile(r"[0-9][0-9T:_\-]*")


def feed_name(path: str) -> str:
    """A short name for the feed: the file's name without date and ending; only letters, digits, - and _."""
    name = path.rsplit("/", 1)[-1]
    name = _DATES.sub("-", _ENDINGS.sub("", name))
    name = re.sub(r"[^A-Za-z0-9_-]+", "-", name).strip("-_")[:40]
    return name.lower() or "events"


def called(field: Field | None) -> str:
    """A field as people call it."""
    if field is None:
        return "the number"
    return f"column {field}" if isinstance(field, int) else field


def exactly(path: str) -> str:
    """The pattern that means this path alone."""
    return _SPECIAL.sub(r"[\1]", path)


def general_pattern(paths: Sequence[str]) -> str | None:
    """One pattern for paths that differ in their digits alone (dates, counters); None when they differ more."""
    patterns = {_DIGITS.sub("*", exactly(path.rsplit("/", 1)[-1])) for path in paths}
    folders = {path.rpartition("/")[0] for path in paths}
    if len(patterns) != 1 or len(folders) != 1:
        return None
    folder, (pattern,) = folders.pop(), patterns
    if "*" not in pattern or set(pattern) <= set("*.-_"):
        return None
    return f"{exactly(folder)}/{pattern}" if folder or paths[0].startswith("/") else pattern
