"""Lines of CSV, of key=value pairs and of web-server logs: where their fields stand, if they stand plainly."""

from __future__ import annotations

from typing import Any

import numpy as np

from monitor.parse.kernels.compiling import helper, part
from monitor.parse.kernels.desk import (
    CSV,
    END,
    EVERYTHING,
    FIELDS,
    FORMAT,
    NUMBER,
    OUT,
    OWN,
    PAIRS,
    POWERS_OF_TEN,
    SIZE,
    TEXT,
)  # fmt: skip
from monitor.parse.kernels.scalars import json_number
from monitor.parse.kernels.words import (
    byte,
    keep,
    kept,
    next_gap,
    next_mark,
    next_newline,
    next_pair_mark,
    next_separator,
    same_bytes,
)

# CSV
COLUMNS = OWN  # of each field its column, -1: none
DELIMITER = COLUMNS + 8 * FIELDS
FEWEST = DELIMITER + 8  # columns that a line must have at least,
MOST = FEWEST + 8  # and at most
# Pairs
KEYS = OWN  # of each field the bytes of its key, 0: none; and the place of its words on the desk
WORDS = KEYS + 16 * FIELDS
# Web-server logs
PARTS = OWN  # of each field which part it is, -1: none
SPLIT = PARTS + 8 * FIELDS  # whether a part of the request is wanted
PLACES = SPLIT + 8  # of each part its start and end
HOST, IDENT, USER, WHEN, REQUEST, STATUS, BYTES, METHOD, PATH, PROTOCOL = range(10)
LOG_END = PLACES + 16 * 10


@part
def text_line(p: Any, desk: Any) -> Any:
    """Read the line at p: its fields to OUT, its newline to END. Returns 0, -1 in doubt."""
    format_ = kept(desk + FORMAT)
    if format_ == CSV:
        e = _csv_line(p, desk)
    elif format_ == PAIRS:
        e = _pairs_line(p, desk)
    else:
        e = _log_line(p, desk)
    if e < 0:
        return np.int64(-1)
    keep(desk + END, e)
    wanted = kept(desk + EVERYTHING)
    for f in range(FIELDS):
        out = desk + OUT + 24 * f
        if wanted >> f & 1:
            first, last = byte(kept(out)), byte(kept(out + 8) - 1)
            if kept(out) >= kept(out + 8) or first == 32 or first == 9 or last == 32 or last == 9:
                return np.int64(-1)
            keep(out + 16, np.int64(TEXT))
    out = desk + OUT + 24 * SIZE
    end = kept(out + 8)
    keep(out + 16, np.int64(NUMBER))
    return np.int64(0) if json_number(kept(out), desk + POWERS_OF_TEN, out) == end else np.int64(-1)


@helper
def _line_end(p: Any, e: Any) -> Any:
    """Where the line's text ends whose newline is at e, and in which p is a place."""
    return e - 1 if e > p and byte(e - 1) == 13 else e


@part
def _csv_line(p: Any, desk: Any) -> Any:
    """The newline of a CSV line, -1 in doubt; the fields' places to OUT."""
    delimiter, column, line = kept(desk + DELIMITER), np.int64(0), p
    while True:
        start, doubled = p, False
        if byte(p) == 34:
            start = p + 1
            q = _closing_quote(start, delimiter)
            if q < 0:
                return np.int64(-1)
            while byte(q + 1) == 34:
                doubled = True
                q = _closing_quote(q + 2, delimiter)
                if q < 0:
                    return np.int64(-1)
            p = q + 1
            if byte(p) == 13 and byte(p + 1) == 10:
                p += 1
            if byte(p) != delimiter and byte(p) != 10:
                return np.int64(-1)
        else:
            p = next_separator(p, delimiter)
            if byte(p) == 34:
                return np.int64(-1)
            q = _line_end(line, p) if byte(p) == 10 else p
        for f in range(FIELDS):
            if kept(desk + COLUMNS + 8 * f) == column:
                if doubled:
                    return np.int64(-1)
                keep(desk + OUT + 24 * f, start)
                keep(desk + OUT + 24 * f + 8, q)
        column += 1
        if byte(p) == 10:
            return p if kept(desk + FEWEST) <= column <= kept(desk + MOST) else np.int64(-1)
        p += 1


@part
def _closing_quote(p: Any, delimiter: Any) -> Any:
    """Place of the first quote at or behind p, -1 when the line ends before it."""
    p = next_separator(p, delimiter)
    while byte(p) == delimiter:
        p = next_separator(p + 1, delimiter)
    return p if byte(p) == 34 else np.int64(-1)


@part
def _pairs_line(p: Any, desk: Any) -> Any:
    """The newline of a line of pairs, -1 in doubt; the fields' places to OUT."""
    found = np.int64(0)
    while True:
        while byte(p) == 32 or byte(p) == 9:
            p += 1
        q = _pair_mark(p)
        if byte(q) == 34:
            return np.int64(-1)
        if byte(q) == 61:
            start, key = q + 1, np.int64(0)
            for f in range(FIELDS):
                name = desk + KEYS + 16 * f
                if q - p == kept(name) and q > p and same_bytes(p, q - p, desk + kept(name + 8)):
                    key |= 1 << f
            if byte(start) == 34:
                start += 1
                end = _quoted_end(start, key != 0)
                q = end + 1
                if end < 0 or not (
                    byte(q) == 32 or byte(q) == 9 or byte(q) == 10 or (byte(q) == 13 and byte(q + 1) == 10)
                ):
                    return np.int64(-1)
            else:
                q = _pair_mark(start)
                while byte(q) == 61:
                    q = _pair_mark(q + 1)
                if byte(q) == 34:
                    return np.int64(-1)
                end = _line_end(start, q) if byte(q) == 10 else q
            found |= key
            for f in range(FIELDS):
                if key >> f & 1:
                    keep(desk + OUT + 24 * f, start)
                    keep(desk + OUT + 24 * f + 8, end)
        p = q
        if byte(p) == 13 and byte(p + 1) == 10:
            p += 1
        if byte(p) == 10:
            return p if found == kept(desk + EVERYTHING) else np.int64(-1)


@part
def _pair_mark(p: Any) -> Any:
    """Place of the first space, tab, newline, quote or equals sign at or behind p."""
    p = next_pair_mark(p)
    while byte(p) < 32 and byte(p) != 9 and byte(p) != 10:
        p = next_pair_mark(p + 1)
    return p


@part
def _quoted_end(p: Any, wanted: Any) -> Any:
    """Place of the quote that ends a quoted value whose text starts at p; -1 in doubt."""
    while True:
        p = next_mark(p)
        c = byte(p)
        if c == 34:
            return p
        if c == 10 or (c == 92 and (wanted or byte(p + 1) == 10)):
            return np.int64(-1)
        p += 2 if c == 92 else 1


@part
def _log_line(p: Any, desk: Any) -> Any:
    """The newline of a line of a web server's log, -1 in doubt; the fields' places to OUT."""
    places = desk + PLACES
    for k in range(WHEN):
        q = next_gap(p)
        if byte(q) != 32 or q == p:
            return np.int64(-1)
        keep(places + 16 * k, p)
        keep(places + 16 * k + 8, q)
        p = q + 1
    if byte(p) != 91:
        return np.int64(-1)
    p += 1
    q = next_separator(p, np.int64(93))
    if byte(q) != 93 or byte(q + 1) != 32 or byte(q + 2) != 34:
        return np.int64(-1)
    keep(places + 16 * WHEN, p)
    keep(places + 16 * WHEN + 8, q)
    start = q + 3
    end = next_mark(start)
    if byte(end) != 34 or byte(end + 1) != 32 or byte(end + 5) != 32:
        return np.int64(-1)
    for k in range(2, 5):
        if byte(end + k) < 48 or byte(end + k) > 57:
            return np.int64(-1)
    keep(places + 16 * REQUEST, start)
    keep(places + 16 * REQUEST + 8, end)
    if kept(desk + SPLIT) and not _split_request(start, end, places):
        return np.int64(-1)
    keep(places + 16 * STATUS, end + 2)
    keep(places + 16 * STATUS + 8, end + 5)
    q = next_gap(end + 6)
    keep(places + 16 * BYTES, end + 6)
    keep(places + 16 * BYTES + 8, q)
    if q == end + 6 or (byte(q) != 32 and byte(q) != 10 and (byte(q) != 13 or byte(q + 1) != 10)):
        return np.int64(-1)
    for f in range(FIELDS):
        k = kept(desk + PARTS + 8 * f)
        if k >= 0:
            start, end = kept(places + 16 * k), kept(places + 16 * k + 8)
            if end - start == 1 and byte(start) == 45:
                return np.int64(-1)  # a dash stands for nothing
            keep(desk + OUT + 24 * f, start)
            keep(desk + OUT + 24 * f + 8, end)
    return next_newline(q)


@part
def _split_request(start: Any, end: Any, places: Any) -> Any:
    """The places of method, path and protocol; whether the request between start and end has these three words."""
    first = next_gap(start)
    second = next_gap(first + 1)
    if second >= end or next_gap(second + 1) < end:
        return False
    keep(places + 16 * METHOD, start)
    keep(places + 16 * METHOD + 8, first)
    keep(places + 16 * PATH, first + 1)
    keep(places + 16 * PATH + 8, second)
    keep(places + 16 * PROTOCOL, second + 1)
    keep(places + 16 * PROTOCOL + 8, end)
    return True
