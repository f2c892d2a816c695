"""Which field is the size: candidates ranked with their reasons, and why the other numbers are none.

What counts for a size: positive, a number on nearly every line, many different values, a largest value far
above the usual one, a name of a quantity. Against it: a name or a look of an identifier, a time, a port, a
status, a place on earth, a share.
"""

from __future__ import annotations

import re
from collections.abc import Iterator

import numpy as np

from monitor.propose.columns import Column, Table
from monitor.propose.records import NotTheSize, SizeCandidate
from monitor.propose.vocabulary import IDENTIFIER, NO_QUANTITY, QUANTITY, STRONG_QUANTITY

_SEPARATORS = re.compile(r"-?\d{1,3}(?:[. ']\d{3})*,\d+|-?\d{1,3}(?:[,']\d{3})+(?:\.\d+)?|-?\d+,\d+")
_WITH_UNIT = re.compile(r"-?[0-9]+(?:\.[0-9]+)? ?([A-Za-z%€$£]+)")


def rank_sizes(
    table: Table, times: frozenset[object]
) -> tuple[tuple[SizeCandidate, ...], tuple[NotTheSize, ...]]:  # fmt: skip
    """Candidates, the likeliest first, and the fields with numbers that are none. times: fields that hold times."""
    candidates, refused = [], []
    for column in table.columns:
        why = _why_not(column, table, times)
        if why is None:
            candidates.append(_candidate(column, table))
        elif why:
            refused.append(NotTheSize(field=column.field, why=why))
    return tuple(sorted(candidates, key=lambda c: -c.score)), tuple(refused)


def _why_not(column: Column, table: Table, times: frozenset[object]) -> str | None:
    """Why a column cannot be the size; "" when it is not worth telling; None when it can."""
    if column.present < max(3, 0.02 * table.rows):
        return ""
    if column.field in times:
        return "holds times"
    if column.numeric < 0.5:
        return _nearly_a_number(column)
    if column.quoted:
        return "its numbers stand in quotes, and a size in JSON must be a bare number; let the writer change that"
    if table.lines == "number":  # there is nothing else that could be the size
        return None if column.positive.size else "none of its numbers is above zero"
    return _named_otherwise(column) or _looks_otherwise(column, table)


def _nearly_a_number(column: Column) -> str:
    texts = [t for t in column.texts if t is not None][:500]
    if sum(bool(_SEPARATORS.fullmatch(t)) for t in texts) > 0.3 * len(texts) and column.numeric < 0.5:
        return (
            f"its numbers are written like {texts[0][:20]}, with a decimal comma or separators of thousands, which "
            "are not read: only 1234.5 is"
        )
    units = [m[1] for t in texts if (m := _WITH_UNIT.fullmatch(t))]
    if len(units) > 0.8 * len(texts) and len(set(units)) <= 3:
        return f'its numbers carry their unit ({", ".join(sorted(set(units)))}); lines = "pattern" can cut that off'
    return ""


def _named_otherwise(column: Column) -> str | None:
    quantity = bool(column.words & STRONG_QUANTITY)
    for what, names in NO_QUANTITY.items():
        if column.words & names and not quantity:
            return f"its name says {what}"
    if column.whole and column.words & IDENTIFIER and not column.words & QUANTITY:
        return "its name says an identifier"
    return None


def _looks_otherwise(column: Column, table: Table) -> str | None:
    numbers = column.numbers
    if column.positive.size < 0.5 * numbers.size:
        return "most of its numbers are not above zero"
    distinct = len(column.counts)
    if distinct < 5 and numbers.size >= 20:
        return f"it has only {distinct} different values"
    if float(column.positive[-1]) <= 1.0:
        return "all of it lies between 0 and 1, as a share does"
    steps = column.steps(column.all_numbers)
    if column.whole and steps.size >= 10 and (steps > 0).mean() > 0.95:
        return "it rises from line to line, as a running number does"
    if column.whole and steps.size >= 10 and (steps >= 0).mean() > 0.98 and distinct > 20:
        return "it never falls, as a running number or a counter does"
    negative = float((numbers < 0).mean())
    if numbers.size >= 20 and np.abs(numbers).max() <= 180 and negative > 0.2 and not column.whole:
        return "it lies between -180 and 180 on both sides of zero, as a place on earth does"
    unusual = column.whole and numbers.min() >= 100 and numbers.max() <= 599 and distinct <= 25
    if unusual and not column.words & QUANTITY:
        return f"it has {distinct} values between 100 and 599, as a status does"
    return None


def _candidate(column: Column, table: Table) -> SizeCandidate:
    reasons = [*_by_values(column, table), *_by_name(column)]
    return SizeCandidate(
        field=column.field,
        score=round(sum(points for points, _ in reasons), 2),
        evidence=tuple(words for _, words in reasons),
    )


def _by_values(column: Column, table: Table) -> Iterator[tuple[float, str]]:
    """Points for a candidate and their reasons: presence, sign, spread, variety."""
    positive, numbers = column.positive, column.numbers
    share = numbers.size / max(1, table.rows)
    yield share, "a number on every line" if share == 1 else f"a number on {100 * share:.3g} % of the lines"
    below = numbers.size - positive.size
    yield -2.0 * below / numbers.size, f"{below} of {numbers.size} not above zero" if below else "all above zero"
    median, largest = float(np.median(positive)), float(positive[-1])
    spread = largest / median
    yield (
        min(3.0, 1.5 * float(np.log10(spread))) if spread >= 3 else -2.0,
        f"the largest ({largest:.6g}) is {spread:.3g} times the median ({median:.6g})",
    )
    distinct = len(column.counts)
    if column.whole and positive.size >= 200 and distinct > 0.98 * positive.size and spread < 5:
        yield -3.0, "but nearly every value occurs once, as with identifiers"
    if distinct <= 20 and positive.size >= 100:
        yield -1.5, f"but only {distinct} different values"


def _by_name(column: Column) -> Iterator[tuple[float, str]]:
    strong = bool(column.words & STRONG_QUANTITY)
    if column.words & QUANTITY:
        yield 3.0 if strong else 2.0, "named like a quantity"
    if column.words & IDENTIFIER and not strong:
        yield -1.0, "but its name could also mean an identifier"
