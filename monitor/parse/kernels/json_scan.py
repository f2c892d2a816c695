"""JSON lines in one compiled pass: the plain ones are settled here, every doubt is left to the readers of records.

A line is settled when it is one JSON object by RFC 8259 that holds each wanted field once, as a plain value:
the size a number that converts exactly, the time an RFC 3339 stamp or a whole number, the stream a string
without escapes. Whatever else a line holds is checked against the grammar and skipped. A line that is not
settled is not refused: it only takes the slower way, which also finds the reason if there is one. So this
pass may be as narrow as it likes, but must never settle a line differently from that way.

Most lines of a log are laid out like one before: the same bytes between their scalars. So the layout of each
line that had to be read by the grammar is kept, and a line that has the same bytes in the same places, and
scalars of the same kinds between them, is as valid as that one was.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from monitor.parse.kernels.compiling import helper, part
from monitor.parse.kernels.desk import (
    END,
    EVERYTHING,
    FIELDS,
    NO_FIELD,
    NUMBER,
    OUT,
    OWN,
    POWERS_OF_TEN,
    SIZE,
    STREAM,
    TEXT,
    TIME,
)  # fmt: skip
from monitor.parse.kernels.scalars import json_number, past_number, whole_number
from monitor.parse.kernels.words import (
    byte,
    keep,
    kept,
    lowest,
    next_mark,
    next_newline,
    same_bytes,
    word,
)

DEEPEST = 32
FINALS = OWN  # of each depth, the mask of the fields whose path ends there
NAMES = FINALS + 8 * DEEPEST  # of each field and depth: bytes of the name, and the place of its words on the desk
KINDS = NAMES + 16 * FIELDS * DEEPEST
MASKS = KINDS + 8 * DEEPEST
SCALARS = MASKS + 8 * DEEPEST  # start, end, and what it is, of each scalar of a line
MOST_SCALARS = 64
LAYOUTS = SCALARS + 24 * MOST_SCALARS
MOST_LAYOUTS, LAYOUT_BYTES = 4, 4096
TURN = LAYOUTS + MOST_LAYOUTS * LAYOUT_BYTES  # the layout to be overwritten next
WORDS = TURN + 8  # words of the names

_OBJECT, _ARRAY = 0, 1
_KEY_OR_END, _KEY, _VALUE, _VALUE_OR_END, _AFTER = 0, 1, 2, 3, 4  # what is expected next
_LITERAL, _LAST = 2, 3  # beside TEXT and NUMBER


@helper
def _past_space(p: Any) -> Any:
    while byte(p) == 32 or byte(p) == 9 or byte(p) == 13:
        p += 1
    return p


@part
def _past_escapes(p: Any) -> Any:
    """Place of the closing quote of a string that goes on at p; -1 in doubt."""
    while True:
        p = next_mark(p)
        c = byte(p)
        if c == 34:
            return p
        if c != 92:
            return np.int64(-1)
        c = byte(p + 1)
        if c == 117:
            # A code below D800: anything else may be half of a pair, which only the other way judges.
            for k in range(2, 6):
                d = byte(p + k)
                if not (48 <= d <= 57 or 97 <= d | 32 <= 102) or (k == 2 and d | 32 > 99 and d > 57):
                    return np.int64(-1)
            p += 6
        elif c == 34 or c == 92 or c == 47 or c == 98 or c == 102 or c == 110 or c == 114 or c == 116:
            p += 2
        else:
            return np.int64(-1)


@part
def _past_literal(p: Any) -> Any:
    """End of true, false or null at p; -1 when it is none."""
    four = word(p) & lowest(np.int64(4))
    if four == 0x65757274 or four == 0x6C6C756E:  # true, null
        return p + 4
    return p + 5 if four == 0x736C6166 and byte(p + 4) == 101 else np.int64(-1)  # false


@part
def _fields_called(p: Any, q: Any, depth: Any, desk: Any) -> Any:
    """The mask of the fields in which the name between p and q stands at this depth."""
    found, able = np.int64(0), kept(desk + MASKS + 8 * depth)
    for f in range(FIELDS):
        name = desk + NAMES + 16 * (f * DEEPEST + depth)
        if able >> f & 1 and q - p == kept(name) and same_bytes(p, q - p, desk + kept(name + 8)):
            found |= 1 << f
    return found


@part
def _field_of(mask: Any) -> Any:
    """The one field of a mask, NO_FIELD when it is empty."""
    f = np.int64(0)
    while f < FIELDS and not mask >> f & 1:
        f += 1
    return f


@part
def _string(p: Any, field: Any, desk: Any) -> Any:
    """Place of the closing quote of the string whose first byte is at p, -1 in doubt; keeps where a field's is."""
    q = next_mark(p)
    if byte(q) == 92 and field == NO_FIELD:
        q = _past_escapes(q)
    if q < 0 or byte(q) != 34:
        return np.int64(-1)
    out = desk + OUT + 24 * field
    keep(out, p)
    keep(out + 8, q)
    keep(out + 16, np.int64(TEXT))
    return q


@part
def _number(p: Any, field: Any, desk: Any) -> Any:
    """End of the number at p, -1 in doubt; keeps what a field needs of it."""
    out = desk + OUT + 24 * field
    keep(out + 16, np.int64(NUMBER))
    if field == SIZE:
        return json_number(p, desk + POWERS_OF_TEN, out)
    if field == TIME:
        return whole_number(p, out)
    if field == STREAM:
        keep(out, p)
        p = whole_number(p, out + 8)
        keep(out + 8, p)
        return p
    return past_number(p)


@part
def _by_grammar(p: Any, desk: Any) -> Any:
    """Read one object at p. Returns how many scalars it has, -1 in doubt; keeps them at SCALARS, the fields at OUT."""
    everything = kept(desk + EVERYTHING)
    p = _past_space(p)
    if byte(p) != 123:
        return np.int64(-1)
    p += 1
    depth = found = opened = current = count = np.int64(0)
    keep(desk + KINDS, np.int64(_OBJECT))
    keep(desk + MASKS, everything)
    state = _KEY_OR_END
    while True:
        p = _past_space(p)
        c = byte(p)
        if c == 10:
            return np.int64(-1)
        if state <= _KEY:
            if c == 125 and state == _KEY_OR_END:
                state = _AFTER
                continue
            q = next_mark(p + 1)
            escaped = byte(q) == 92
            if escaped:
                q = _past_escapes(q)
            if c != 34 or q < 0 or byte(q) != 34 or (escaped and kept(desk + MASKS + 8 * depth)):
                return np.int64(-1)
            current = _fields_called(p + 1, q, depth, desk)
            p = _past_space(q + 1)
            if byte(p) != 58:
                return np.int64(-1)
            p += 1
            state = _VALUE
        elif state <= _VALUE_OR_END:
            if c == 93 and state == _VALUE_OR_END:
                state = _AFTER
                continue
            final = current & kept(desk + FINALS + 8 * depth)
            if final & found or current & opened:
                return np.int64(-1)  # a name that counts stands there twice
            if c == 123 or c == 91:
                if final or depth + 1 >= DEEPEST or (current and c == 91):
                    return np.int64(-1)
                opened |= current
                depth += 1
                keep(desk + KINDS + 8 * depth, np.int64(_OBJECT if c == 123 else _ARRAY))
                keep(desk + MASKS + 8 * depth, current if c == 123 else np.int64(0))
                state = _KEY_OR_END if c == 123 else _VALUE_OR_END
                current = np.int64(0)
                p += 1
                continue
            if current and not final:
                return np.int64(-1)  # an object was expected
            field = _field_of(final)
            kind = TEXT if c == 34 else NUMBER if c == 45 or 48 <= c <= 57 else _LITERAL
            if kind == TEXT:
                q = _string(p + 1, field, desk)
            elif kind == NUMBER:
                q = _number(p, field, desk)
            else:
                q = _past_literal(p) if field == NO_FIELD else np.int64(-1)
            if q < 0:
                return np.int64(-1)
            found |= final
            if count < MOST_SCALARS:
                place = desk + SCALARS + 24 * count
                keep(place, p + 1 if kind == TEXT else p)
                keep(place + 8, q)
                keep(place + 16, 4 * kind + field)
            count += 1
            p = q + 1 if kind == TEXT else q
            state = _AFTER
        elif c == 44:
            state = _KEY if kept(desk + KINDS + 8 * depth) == _OBJECT else _VALUE
            current = np.int64(0)
            p += 1
        elif c == (125 if kept(desk + KINDS + 8 * depth) == _OBJECT else 93):
            p += 1
            depth -= 1
            if depth < 0:
                return count if found == everything and byte(_past_space(p)) == 10 else np.int64(-1)
        else:
            return np.int64(-1)


@part
def _learn(p: Any, e: Any, count: Any, desk: Any) -> Any:
    """Keep the layout of the line between p and its newline e, which has `count` scalars.

    A layout is a row of segments: bytes before a scalar (or the end, newline included), what that scalar is, and
    those bytes as words. A layout without bytes is none.
    """
    turn = kept(desk + TURN)
    layout = desk + LAYOUTS + turn * LAYOUT_BYTES
    if count > MOST_SCALARS:
        return
    last = layout + LAYOUT_BYTES
    at = layout
    for k in range(count + 1):
        place = desk + SCALARS + 24 * k
        end = e + 1 if k == count else kept(place)
        if at + 24 + (end - p) > last:
            keep(layout, np.int64(0))
            return
        keep(at, end - p)
        keep(at + 8, np.int64(4 * _LAST + NO_FIELD) if k == count else kept(place + 16))
        at += 16
        while end - p >= 8:
            keep(at, word(p))
            at += 8
            p += 8
        if end - p > 0:
            keep(at, word(p) & lowest(end - p))
            at += 8
        p = kept(place + 8)
    keep(desk + TURN, (turn + 1) % MOST_LAYOUTS)


@part
def _by_layout(p: Any, layout: Any, desk: Any) -> Any:
    """The end (newline) of a line at p that is laid out so, keeping its fields at OUT; -1 when it is not."""
    while True:
        length, what = kept(layout), kept(layout + 8)
        layout += 16
        if not same_bytes(p, length, layout):
            return np.int64(-1)
        p += length
        layout += (length + 7) & ~7
        kind = what >> 2
        if kind == TEXT:
            p = _string(p, what & 3, desk)
            if p < 0:
                return np.int64(-1)
        elif kind == NUMBER:
            p = _number(p, what & 3, desk)
            if p < 0:
                return np.int64(-1)
        elif kind == _LITERAL:
            p = _past_literal(p)
            if p < 0:
                return np.int64(-1)
        else:
            return p - 1


@part
def json_line(p: Any, layout: Any, desk: Any) -> Any:
    """Read a line by the layout of the last one, by another, or by the grammar.

    Returns which layout, -1 in doubt; keeps the newline's place at END.
    """
    first = desk + LAYOUTS
    if kept(first + layout * LAYOUT_BYTES) > 0:
        e = _by_layout(p, first + layout * LAYOUT_BYTES, desk)
        if e >= 0:
            keep(desk + END, e)
            return layout
    return _otherwise(p, layout, desk)


@part
def _otherwise(p: Any, layout: Any, desk: Any) -> Any:
    """json_line, where the layout of the last line did not fit."""
    first = desk + LAYOUTS
    for _ in range(MOST_LAYOUTS - 1):
        layout = (layout + 1) % MOST_LAYOUTS
        if kept(first + layout * LAYOUT_BYTES) > 0:
            e = _by_layout(p, first + layout * LAYOUT_BYTES, desk)
            if e >= 0:
                keep(desk + END, e)
                return layout
    count = _by_grammar(p, desk)
    if count < 0:
        return np.int64(-1)
    layout, e = kept(desk + TURN), next_newline(p)
    _learn(p, e, count, desk)
    keep(desk + END, e)
    return layout
