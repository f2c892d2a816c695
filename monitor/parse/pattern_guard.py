"""Refuses regular expressions that a hostile line could keep busy for ever.

Matching by backtracking costs about n to the power of the number of *loose* repetitions (those that could also
have stopped earlier, since what follows may start with a character they take), once more n if the search may
start anywhere. Allowed are expressions with a power of 2 at most, on lines of at most LONGEST_LINE characters:
a few milliseconds for the worst line. A repetition inside a repetition can be exponential and is refused, as
are alternatives under a repetition, lookarounds and references back. Some harmless expressions are refused
with them; "[^ ]+ " instead of ".* " makes most of them tight.
"""

from __future__ import annotations

import re
from re import _constants, _parser  # type: ignore[attr-defined]  # the tree of an expression has no public form
from typing import Any

LONGEST_LINE = 2000
_HIGHEST_POWER = 2
_MANY = 16  # a repetition of more counts as unbounded
_ALL = frozenset(range(257))  # Latin characters one by one, and 256 for all others
_REPEATS = (_constants.MAX_REPEAT, _constants.MIN_REPEAT, _constants.POSSESSIVE_REPEAT)
_REFUSED = {
    _constants.ASSERT: "a lookahead or lookbehind",
    _constants.ASSERT_NOT: "a lookahead or lookbehind",
    _constants.GROUPREF: "a reference back to a group",
    _constants.GROUPREF_EXISTS: "a condition on a group",
}
_CLASSES = {
    _constants.CATEGORY_DIGIT: r"\d",
    _constants.CATEGORY_NOT_DIGIT: r"\D",
    _constants.CATEGORY_SPACE: r"\s",
    _constants.CATEGORY_NOT_SPACE: r"\S",
    _constants.CATEGORY_WORD: r"\w",
    _constants.CATEGORY_NOT_WORD: r"\W",
}


class Unsafe(ValueError):  # noqa: N818 - what is the matter with the expression
    """The expression may take too long; the message says which part and why."""


def check_pattern(pattern: str) -> re.Pattern[str]:
    """Compile a regular expression. Raises re.error for a broken one and Unsafe for a slow one."""
    compiled = re.compile(pattern)
    tree = _parser.parse(pattern)
    if compiled.flags & re.IGNORECASE:
        raise Unsafe("(?i) is not allowed; write both letters, such as [Uu]nits")
    power = _loose(list(tree), None) + (0 if _anchored(list(tree)) else 1)
    if power > _HIGHEST_POWER:
        raise Unsafe(
            "too many repetitions that could stop anywhere, such as .*; start it with ^ and say what may stand "
            "in each part, such as [^ ]+ instead of .*"
        )
    return compiled


Nodes = list[tuple[Any, Any]]
Follow = frozenset[int] | None
"""Characters that may come next; None: the expression is over, nothing can go wrong any more."""


def _anchored(nodes: Nodes) -> bool:
    return (
        bool(nodes)
        and nodes[0][0] is _constants.AT
        and nodes[0][1]
        in (
            _constants.AT_BEGINNING,
            _constants.AT_BEGINNING_STRING,
        )
    )


def _loose(nodes: Nodes, follow: Follow) -> int:
    """Loose repetitions in a sequence that is followed by `follow`."""
    count = 0
    for i, (kind, value) in enumerate(nodes):
        after = _first(nodes[i + 1 :], follow)
        if kind in _REFUSED:
            raise Unsafe(f"{_REFUSED[kind]} is not allowed")
        if kind in _REPEATS:
            count += _repeat(value, after, possessive=kind is _constants.POSSESSIVE_REPEAT)
        elif kind is _constants.SUBPATTERN:
            count += _loose(list(value[-1]), after)
        elif kind is _constants.ATOMIC_GROUP:
            count += _loose(list(value), after)
        elif kind is _constants.BRANCH:
            count += max(_loose(list(branch), after) for branch in value[1])
    return count


def _repeat(value: Any, after: Follow, *, possessive: bool) -> int:
    least, most, body = value[0], value[1], list(value[2])
    if most == 1:
        return _loose(body, after)
    if _varies(body):
        raise Unsafe("a repetition or a choice inside a repetition is not allowed")
    if least == most or possessive or after is None:
        return 0
    if most <= _MANY and len(body) == 1:
        return 0  # a few more ways at most
    return int(bool(_first(body, frozenset()) & after))  # type: ignore[operator]


def _varies(body: Nodes) -> bool:
    """Whether the same text could be taken in more than one way."""
    for kind, value in body:
        if kind in _REFUSED:
            raise Unsafe(f"{_REFUSED[kind]} is not allowed")
        if kind in _REPEATS and (value[0] != value[1] or _varies(list(value[2]))):
            return True
        if kind is _constants.BRANCH:
            return True
        if kind is _constants.SUBPATTERN and _varies(list(value[-1])):
            return True
        if kind is _constants.ATOMIC_GROUP and _varies(list(value)):
            return True
    return False


def _first(nodes: Nodes, follow: Follow) -> Follow:
    """Characters that a sequence may start with, those behind it included where it may be empty."""
    found: frozenset[int] = frozenset()
    for kind, value in nodes:
        starts, empty = _starts(kind, value)
        found |= starts
        if not empty:
            return found
    return None if follow is None and not found else (found | (follow if follow is not None else _ALL))


def _starts(kind: Any, value: Any) -> tuple[frozenset[int], bool]:
    """Characters that one node may start with, and whether it may be empty."""
    if kind in _REPEATS:
        inner = _first(list(value[2]), frozenset())
        return inner or frozenset(), value[0] == 0
    if kind is _constants.SUBPATTERN:
        return _group(list(value[-1]))
    if kind is _constants.ATOMIC_GROUP:
        return _group(list(value))
    if kind is _constants.BRANCH:
        parts = [_group(list(branch)) for branch in value[1]]
        return frozenset().union(*(p[0] for p in parts)), any(p[1] for p in parts)
    if kind is _constants.AT:
        # Nothing can stand behind the end; any other place is no character.
        at_end = value in (_constants.AT_END, _constants.AT_END_STRING)
        return frozenset({10} if at_end else ()), not at_end
    return _characters(kind, value), False


def _group(nodes: Nodes) -> tuple[frozenset[int], bool]:
    mark = frozenset({-1})
    found = _first(nodes, mark) or frozenset()
    return found - mark, bool(found & mark)


def _characters(kind: Any, value: Any) -> frozenset[int]:
    if kind is _constants.LITERAL:
        return frozenset({min(value, 256)})
    if kind is _constants.NOT_LITERAL:
        return _ALL - {value}
    if kind is _constants.RANGE:
        return frozenset(range(min(value[0], 256), min(value[1], 256) + 1))
    if kind is _constants.CATEGORY:
        return frozenset(c for c in _ALL if re.match(_CLASSES[value], chr(c))) | {256}
    if kind is _constants.IN:
        negated = value[0][0] is _constants.NEGATE
        members = frozenset().union(*(_characters(k, v) for k, v in value if k is not _constants.NEGATE))
        return (_ALL - members) | {256} if negated else members
    return _ALL
