"""Names of rotated files: which files beside a path are its earlier generations, and in which order.

A rotated name is the path with a counter, a date or an "old" behind it (orders.jsonl.1, orders.jsonl-20261201),
or with a date before its ending (orders-2026-12-01.jsonl); each may end in .gz. Counters grow with age, dates
shrink with it. A short number before the ending is no rotation: node-1.log and node-2.log are two nodes.
"""

from __future__ import annotations

import fnmatch
import os
import re
from collections.abc import Sequence

_BEHIND = re.compile(r"[.\-_](?P<tag>\d[\dT.:_\-]*Z?|old|bak|prev)", re.IGNORECASE)
_BEFORE_ENDING = re.compile(r"[.\-_](?P<tag>\d{4}-?\d\d(?:-?\d\d)?(?:[T_\-.]?\d[\d:_\-]*)?)")
_COUNTER = re.compile(r"\d{1,5}")


def rotation_tag(path: str, base: str) -> str | None:
    """The counter or date that makes `path` a rotated name of `base`, None when it is none."""
    folder, name = os.path.split(path)
    base_folder, base_name = os.path.split(base)
    if folder != base_folder or name == base_name:
        return None
    plain = name.removesuffix(".gz")
    if plain == base_name:
        return "0"  # compressed where it stood
    if plain.startswith(base_name) and (match := _BEHIND.fullmatch(plain, len(base_name))):
        return match["tag"]
    stem, ending = os.path.splitext(base_name)
    if ending and plain.startswith(stem) and plain.endswith(ending):
        inner = plain[len(stem) : len(plain) - len(ending)]
        if match := _BEFORE_ENDING.fullmatch(inner):
            return match["tag"]
    return None


def base_of(path: str, known: Sequence[str]) -> str | None:
    """The known path that `path` is a rotated name of."""
    return next((base for base in known if rotation_tag(path, base) is not None), None)


def family(base: str) -> list[str]:
    """Rotated files beside a path, oldest first; of a file and its compressed copy only the file."""
    folder = os.path.dirname(base)
    try:
        with os.scandir(folder) as entries:
            paths = [os.path.join(folder, e.name) for e in entries if e.name != os.path.basename(base)]
    except OSError:
        return []
    tagged = {p: tag for p in paths if (tag := rotation_tag(p, base)) is not None}
    kept = [p for p in tagged if not (p.endswith(".gz") and p.removesuffix(".gz") in tagged)]
    return sorted(kept, key=lambda p: (_age(tagged[p]), p))


def _age(tag: str) -> tuple[int, int, str]:
    """Sort key, oldest first: dates ascending, then "old", then counters descending."""
    if _COUNTER.fullmatch(tag):
        return 2, -int(tag), ""
    if tag[0].isdigit():
        return 0, 0, re.sub(r"\D", "", tag).ljust(30, "0")
    return 1, 0, tag


def matches(path: str, pattern: str) -> bool:
    """Whether a path fits a glob as a whole; ** stands for any number of folders."""
    return _fit(path.split("/"), pattern.split("/"))


def _fit(parts: Sequence[str], patterns: Sequence[str]) -> bool:
    if not patterns:
        return not parts
    if patterns[0] == "**":
        return any(_fit(parts[i:], patterns[1:]) for i in range(len(parts) + 1))
    return bool(parts) and fnmatch.fnmatchcase(parts[0], patterns[0]) and _fit(parts[1:], patterns[1:])
