"""The unit of the size, from its field's name or from the difference of two times."""

from __future__ import annotations

import numpy as np

from monitor.propose.columns import Column, Table
from monitor.propose.names import called
from monitor.propose.records import TimeFound
from monitor.propose.times import as_floats, stamps_of
from monitor.propose.vocabulary import CURRENCY

_BY_WORD = {
    "bytes": "bytes", "byte": "bytes", "kb": "kB", "mb": "MB", "gb": "GB", "kib": "KiB", "mib": "MiB", "gib": "GiB",
    "ns": "ns", "us": "us", "ms": "ms", "msec": "ms", "millis": "ms", "milliseconds": "ms", "s": "s", "sec": "s",
    "secs": "s", "seconds": "s", "min": "min", "mins": "min", "minutes": "min", "h": "h", "hours": "h", "days": "days",
    "kg": "kg", "kilos": "kg", "g": "g", "grams": "g", "tonnes": "t", "tons": "tons", "lb": "lb", "lbs": "lb",
    "eur": "EUR", "usd": "USD", "gbp": "GBP", "chf": "CHF", "jpy": "JPY", "cents": "cents", "units": "units",
    "qty": "units", "quantity": "units", "pieces": "pieces", "pcs": "pieces", "parcels": "parcels",
    "pallets": "pallets",
    "items": "items", "litres": "l", "liters": "l", "kwh": "kWh", "mwh": "MWh", "acres": "acres", "metres": "m",
    "meters": "m", "km": "km", "miles": "miles",
}  # fmt: skip
PER_UNIT = {"ns": 1.0, "us": 1e3, "ms": 1e6, "s": 1e9, "min": 6e10, "h": 3.6e12, "days": 8.64e13}


class UnitFound:
    """A unit, why, and the doubt about it if there is one."""

    def __init__(self, unit: str, evidence: str, doubt: str | None = None) -> None:
        self.unit, self.evidence, self.doubt = unit, evidence, doubt


class Duration:
    """The size is the time from one field to another: their fields, and the unit it is counted in."""

    def __init__(self, start: TimeFound, end: TimeFound, unit: str) -> None:
        self.start, self.end, self.unit = start, end, unit


def find_unit(size: Column, table: Table, duration: Duration | None) -> UnitFound:
    """The unit of the sizes; "units" with a doubt when nothing tells."""
    if duration is not None:
        return UnitFound(
            duration.unit,
            f"the size is {called(duration.end.field)} minus {called(duration.start.field)}, in this unit",
        )
    for word in reversed(_in_order(size)):
        if word in _BY_WORD:
            return UnitFound(_BY_WORD[word], "from the name of the field")
    money = next((c for c in table.columns if c.words & CURRENCY and c.counts), None)
    if money is not None:
        (name, count), *others = money.counts.most_common(2)
        doubt = None
        if others:
            doubt = (
                f"{called(money.field)} takes {len(money.counts)} values ({name}, {others[0][0]}, ...), and sizes of "
                "different currencies do not compare: make it part of the stream, or keep one with where"
            )
        return UnitFound(name, f"the commonest {called(money.field)}, on {count} of {money.present} lines", doubt)
    return UnitFound("units", "the name of the field does not say it", "the unit is not known: put in its name")


def _in_order(column: Column) -> list[str]:
    lower = column.label.lower()
    return sorted(column.words, key=lambda w: (lower.rfind(w), w))


def find_duration(size: Column, table: Table, times: tuple[TimeFound, ...]) -> Duration | None:
    """Whether the size is the difference of two of the times, on at least nine in ten lines."""
    stamps = {t.field: as_floats(stamps_of(_column(table, t), t.unit)) for t in times[:6]}
    values = size.all_numbers
    for start in times[:6]:
        for end in times[:6]:
            gap = stamps[end.field] - stamps[start.field]
            good = np.isfinite(gap) & np.isfinite(values) & (values > 0)
            if start.field == end.field or good.sum() < 10 or (gap[good] > 0).mean() < 0.9:
                continue
            for unit, ns in PER_UNIT.items():
                # Stamps in whole seconds, sizes rounded to their own last digit.
                near = np.abs(values[good] * ns - gap[good]) <= np.maximum(0.02 * gap[good], min(1.01e9, 0.51 * ns))
                if near.mean() >= 0.9 and np.median(gap[good]) >= 2e6:
                    return Duration(start, end, unit)
    return None


def _column(table: Table, time: TimeFound) -> Column:
    return next(c for c in table.columns if c.field == time.field)
