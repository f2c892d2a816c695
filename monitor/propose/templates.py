"""The last resort: a regular expression for lines of free text, made from what the lines have in common.

Lines are cut at spaces; lines with the same number of words and the same constant words belong together. In the
largest such group a word that never varies stays as it is, a varying one becomes a named group: a time, a
number with the letters around it, or anything but a space. The expression is anchored and its groups take no
spaces, so it cannot be slow; it is checked with the guard that the daemon uses.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Sequence

import numpy as np

from monitor.parse.pattern_guard import LONGEST_LINE, Unsafe, check_pattern
from monitor.parse.stamps import NO_STAMP, StampReader
from monitor.parse.text_lines import number
from monitor.propose.columns import Column, Table
from monitor.propose.samples import Line

MOST_WORDS = 60
_GROUPS_TRIED = 6
_NUMBER = r"-?[0-9]+(?:\.[0-9]+)?"
_AROUND = re.compile(rf"(.*?[^0-9.\-]|)({_NUMBER})([^0-9]*)", re.DOTALL)
_GLUED = re.compile(r"[A-Za-z][-_.]?$")  # node-3 is a name, size=3 a number
_WORD = re.compile(r"[A-Za-z]+")
_STAMPS = StampReader()


def pattern_table(lines: Sequence[Line]) -> Table | None:
    """The best expression for the commonest kinds of lines; None when no kind of line holds a varying number."""
    cut = [(line, line.text.split(" ")) for line in lines if len(line.text) <= LONGEST_LINE]
    cut = [(line, words) for line, words in cut if len(words) <= MOST_WORDS]
    best: Table | None = None
    for members in _kinds(cut):
        table = _of_kind(members, len(lines))
        if table is not None and (best is None or table.rows > 1.2 * best.rows):
            best = table
    return best


def _kinds(cut: list[tuple[Line, list[str]]]) -> list[list[tuple[Line, list[str]]]]:
    """Groups of lines that differ in their numbers and names alone, the largest first."""
    common = Counter(word for _, words in cut for word in set(words) if not _has_digit(word))
    constant = {word for word, count in common.items() if count >= max(3, 0.2 * len(cut)) and _WORD.search(word)}
    kinds: dict[tuple[object, ...], list[tuple[Line, list[str]]]] = {}
    for line, words in cut:
        key = (len(words), *(word if word in constant else None for word in words))
        kinds.setdefault(key, []).append((line, words))
    return sorted(kinds.values(), key=len, reverse=True)[:_GROUPS_TRIED]


def _has_digit(word: str) -> bool:
    return any(c.isdigit() for c in word)


def _of_kind(members: list[tuple[Line, list[str]]], total: int) -> Table | None:
    if len(members) < 3:
        return None
    parts = _parts([words for _, words in members])
    groups = [part for part in parts if part.group]
    if not any(part.numeric for part in groups):
        return None
    pattern = "^" + " ".join(part.expression for part in parts)
    while pattern.endswith(" "):
        pattern = pattern[:-1]
    try:
        compiled = check_pattern(pattern)
    except (re.error, Unsafe):
        return None
    found = [(line, match) for line, _ in members if (match := compiled.search(line.text)) is not None]
    if len(found) < 0.9 * len(members):
        return None
    pieces = np.array([line.piece for line, _ in found], np.int64)
    columns = [
        Column(part.group, part.label, [match[part.group] for _, match in found], quoted=False, pieces=pieces)
        for part in groups
    ]
    table = Table("pattern", columns, pieces, total)
    table.pattern = pattern
    table.evidence = f"free text; {len(found)} of {total} sampled lines are of the kind that the pattern reads"
    return table


class _Part:
    """One word of the expression, or several that are one time: its text, and the group in it."""

    def __init__(self, expression: str, group: str = "", label: str = "", *, numeric: bool = False) -> None:
        self.expression, self.group, self.label, self.numeric = expression, group, label, numeric


def _parts(rows: list[list[str]]) -> list[_Part]:
    columns = [[row[i] for row in rows] for i in range(len(rows[0]))]
    parts: list[_Part] = []
    i = 0
    while i < len(columns):
        name = f"field{i + 1}"
        both = [f"{a} {b}" for a, b in zip(columns[i], columns[i + 1], strict=True)] if i + 1 < len(columns) else []
        stamp = _stamp(both, name, r"[^ ]+ [^ ]+") or _stamp(columns[i], name, r"[^ ]+")
        if stamp is not None:
            i += 2 if stamp.numeric else 1
            parts.append(_Part(stamp.expression, stamp.group, stamp.label))
            continue
        before = parts[-1].label if parts and not parts[-1].group else ""
        parts.append(_word(columns[i], name, before, columns[i + 1] if i + 1 < len(columns) else []))
        i += 1
    return parts


def _stamp(texts: list[str], name: str, inner: str) -> _Part | None:
    """A time, perhaps in brackets or with a comma behind it; `numeric` says that it spans two words."""
    if not texts or len(texts[0]) < 8:
        return None
    for before, after in (("", ""), ("[", "]"), ("", ","), ("", ":")):
        bare = [t[len(before) : len(t) - len(after)] for t in texts if t.startswith(before) and t.endswith(after)]
        good = sum(number(t) is None and _STAMPS.text(t) != NO_STAMP for t in bare)
        if good >= 0.95 * len(texts):
            two = " " in inner
            # The last character of the time must not be one that may follow it.
            body = inner[:-1] + "*[0-9Z]"
            return _Part(f"{re.escape(before)}(?P<{name}>{body}){re.escape(after)}", name, "time", numeric=two)
    return None


def _word(texts: list[str], name: str, before: str, following: list[str]) -> _Part:
    counts = Counter(texts)
    if len(counts) == 1:
        return _Part(re.escape(texts[0]), label=" ".join(_WORD.findall(texts[0])))
    matches = [_AROUND.fullmatch(text) for text in texts]
    if all(matches):
        prefixes, suffixes = {m[1] for m in matches if m}, {m[3] for m in matches if m}
        if len(prefixes) == len(suffixes) == 1 and not _GLUED.search(next(iter(prefixes))):
            prefix, suffix = prefixes.pop(), suffixes.pop()
            after = following[0] if following and not suffix.strip(",;:.)]") and len(set(following)) == 1 else ""
            label = " ".join(_WORD.findall(f"{prefix or before} {suffix} {after}"))
            return _Part(f"{re.escape(prefix)}(?P<{name}>{_NUMBER}){re.escape(suffix)}", name, label, numeric=True)
    return _name(texts, name, before)


def _name(texts: list[str], name: str, before: str) -> _Part:
    """A varying word that is no number; a mark before or behind all of them stays outside its group."""
    starts, ends = {text[:1] for text in texts}, {text[-1:] for text in texts}
    start = starts.pop() if len(starts) == 1 and starts <= set("[(<") else ""
    end = ends.pop() if len(ends) == 1 and ends <= set(",;:)]>") else ""
    stem = " ".join(_WORD.findall(_common_start([text[len(start) :] for text in texts])))
    inner = f"[^ {re.escape(end)}]+" if end else "[^ ]+"
    return _Part(f"{re.escape(start)}(?P<{name}>{inner}){re.escape(end)}", name, stem or before)


def _common_start(texts: list[str]) -> str:
    low, high = min(texts), max(texts)
    same = next((i for i, (a, b) in enumerate(zip(low, high, strict=False)) if a != b), min(len(low), len(high)))
    return low[:same]
