"""What the compiled pass has to know of a format, written on the array that it works on."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from numpy.typing import NDArray

from monitor.parse.json_lines import path_of
from monitor.parse.kernels import desk as at
from monitor.parse.kernels import json_scan, text_scan
from monitor.parse.lines import Field, LineFormat
from monitor.parse.stamps import UNITS

SLOTS, MOST_NAMES = 1 << 16, 1 << 15
"""Of the table of stream names."""
_MOST_NAME_BYTES = 1 << 12
_LOG_PARTS = ("host", "ident", "user", "time", "request", "status", "bytes", "method", "path", "protocol")

Desk = NDArray[np.int64]


def json_desk(format_: LineFormat) -> Desk | None:
    """The desk of a JSON format; None when the compiled pass does not know how to read it."""
    if _beyond(format_):
        return None
    keys = ("size", "time", "stream")
    paths = [None if field is None else path_of(field, key) for field, key in zip(_fields(format_), keys, strict=True)]
    named = [path for path in paths if path is not None]
    length = sum(len(name.encode()) + 8 for path in named for name in path)
    if len(set(named)) < len(named) or max(map(len, named)) >= json_scan.DEEPEST or length > _MOST_NAME_BYTES:
        return None
    desk, place = _desk(format_, at.JSON, json_scan.WORDS + _MOST_NAME_BYTES), json_scan.WORDS
    for f, path in enumerate(paths):
        for depth, name in enumerate(path or ()):
            where = json_scan.NAMES // 8 + 2 * (f * json_scan.DEEPEST + depth)
            place = _put_name(desk, where, name, place)
        if path is not None:
            desk[json_scan.FINALS // 8 + len(path) - 1] |= 1 << f
    return desk


def csv_desk(format_: LineFormat, columns: Mapping[Field, int], width: int | None) -> Desk | None:
    """The desk of a CSV format whose columns are known; None as in json_desk."""
    if _beyond(format_):
        return None
    desk = _desk(format_, at.CSV, text_scan.MOST + 8)
    first = text_scan.COLUMNS // 8
    desk[first : first + at.FIELDS] = [-1 if field is None else columns[field] for field in _fields(format_)]
    desk[text_scan.DELIMITER // 8] = ord(format_.delimiter)
    needed = max(desk[first : first + at.FIELDS]) + 1
    desk[text_scan.FEWEST // 8 : text_scan.FEWEST // 8 + 2] = (needed, 1 << 60) if width is None else (width, width)
    return desk


def pairs_desk(format_: LineFormat) -> Desk | None:
    """The desk of a format of pairs; None as in json_desk."""
    keys = [None if field is None else str(field) for field in _fields(format_)]
    if _beyond(format_) or sum(len(key.encode()) + 8 for key in keys if key) > _MOST_NAME_BYTES:
        return None
    desk, place = _desk(format_, at.PAIRS, text_scan.WORDS + _MOST_NAME_BYTES), text_scan.WORDS
    for f, key in enumerate(keys):
        if key is not None:
            place = _put_name(desk, text_scan.KEYS // 8 + 2 * f, key, place)
    return desk


def combined_desk(format_: LineFormat) -> Desk | None:
    """The desk of a web server's log; None as in json_desk."""
    fields = _fields(format_)
    if _beyond(format_) or {"referer", "agent"} & set(fields):
        return None
    desk, first = _desk(format_, at.COMBINED, text_scan.LOG_END), text_scan.PARTS // 8
    parts = [-1 if field is None else _LOG_PARTS.index(str(field)) for field in fields]
    desk[first : first + at.FIELDS] = parts
    desk[text_scan.SPLIT // 8] = max(parts) >= text_scan.METHOD
    return desk


def _beyond(format_: LineFormat) -> bool:
    """What no desk has room for: conditions, several fields in a stream's name."""
    return bool(format_.where) or len(format_.stream) > 1


def _fields(format_: LineFormat) -> tuple[Field | None, ...]:
    """Size, time, stream."""
    return (format_.size, format_.time, format_.stream[0] if format_.stream else None)


def _desk(format_: LineFormat, kind: int, size: int) -> Desk:
    desk = np.zeros(size // 8 + 1, np.int64)
    floats = desk.view(np.float64)
    desk[at.FORMAT // 8] = kind
    desk[at.EVERYTHING // 8] = sum(1 << f for f, field in enumerate(_fields(format_)) if field is not None)
    desk[at.UNIT // 8] = UNITS.get(format_.time_unit, 0)
    desk[at.LOCAL_IS_UTC // 8] = format_.timezone == "UTC"
    floats[at.SCALE // 8] = format_.scale
    desk[at.TABLE // 8 + 1 : at.TABLE // 8 + 3] = SLOTS, MOST_NAMES
    powers = at.POWERS_OF_TEN // 8
    floats[powers : powers + at.POWERS] = [float(10**k) for k in range(at.POWERS)]
    return desk


def _put_name(desk: Desk, where: int, name: str, place: int) -> int:
    """Write a name's words at a place, and its length and that place at index `where`. Returns the next place."""
    encoded = name.encode("utf-8")
    padded = np.frombuffer(encoded + bytes(-len(encoded) % 8), np.int64)
    desk[where : where + 2] = len(encoded), place
    desk[place // 8 : place // 8 + padded.size] = padded
    return place + 8 * padded.size
