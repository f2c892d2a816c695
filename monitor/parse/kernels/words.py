"""Bytes by their address: loading and storing, eight or thirty-two at once, and finding marks among them.

All addresses and results are int64, words uint64. Nothing is checked: the caller keeps within bounds.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from llvmlite import ir
from numba import types
from numba.extending import intrinsic

from monitor.parse.kernels.compiling import helper, kernel

SPARE = 64
"""Bytes behind the text that may be loaded (and are not looked at)."""

_FIRST = ir.Constant(ir.IntType(32), 0)
_BYTE, _WORD, _VECTOR = ir.IntType(8), ir.IntType(64), ir.VectorType(ir.IntType(8), 32)
_QUOTE, _BACKSLASH, _SPACE, _NEWLINE, _EQUALS, _FIRST_HIGH = 34, 92, 32, 10, 61, 128


def _loaded(builder: Any, address: Any, kind: Any, align: Any) -> Any:
    value = builder.load(builder.inttoptr(address, kind.as_pointer()))
    value.align = align
    return value


@intrinsic
def byte(_typing: Any, address: Any) -> Any:
    """The byte at an address, as int64."""

    def generate(_context: Any, builder: Any, _signature: Any, arguments: Any) -> Any:
        return builder.zext(_loaded(builder, arguments[0], _BYTE, 1), _WORD)

    return types.int64(types.int64), generate


@intrinsic
def word(_typing: Any, address: Any) -> Any:
    """Eight bytes as a little-endian uint64."""

    def generate(_context: Any, builder: Any, _signature: Any, arguments: Any) -> Any:
        return _loaded(builder, arguments[0], _WORD, 1)

    return types.uint64(types.int64), generate


@intrinsic
def kept(_typing: Any, address: Any) -> Any:
    """The int64 at an address."""

    def generate(_context: Any, builder: Any, _signature: Any, arguments: Any) -> Any:
        return _loaded(builder, arguments[0], _WORD, 8)

    return types.int64(types.int64), generate


@intrinsic
def kept_float(_typing: Any, address: Any) -> Any:
    """The float64 at an address."""

    def generate(_context: Any, builder: Any, _signature: Any, arguments: Any) -> Any:
        return _loaded(builder, arguments[0], ir.DoubleType(), 8)

    return types.float64(types.int64), generate


@intrinsic
def keep(_typing: Any, address: Any, value: Any) -> Any:
    """Store an int64, uint64 or float64 at an address."""
    kind = value if value in (types.float64, types.uint64) else types.int64

    def generate(context: Any, builder: Any, _signature: Any, arguments: Any) -> Any:
        stored = ir.DoubleType() if kind == types.float64 else _WORD
        builder.store(arguments[1], builder.inttoptr(arguments[0], stored.as_pointer())).align = 8
        return context.get_dummy_value()

    return types.void(types.int64, kind), generate


def _all(value: Any) -> Any:
    return ir.Constant(_VECTOR, [value] * 32)


def _hits(test: Any) -> Any:
    """An intrinsic that tests 32 bytes and returns their hits as bits, the first byte lowest."""

    @intrinsic
    def hits(_typing: Any, address: Any) -> Any:
        def generate(_context: Any, builder: Any, _signature: Any, arguments: Any) -> Any:
            found = test(builder, _loaded(builder, arguments[0], _VECTOR, 1))
            return builder.zext(builder.bitcast(found, ir.IntType(32)), _WORD)

        return types.uint64(types.int64), generate

    return hits


def _is_mark(builder: Any, bytes_: Any) -> Any:
    quote = builder.icmp_unsigned("==", bytes_, _all(_QUOTE))
    back = builder.icmp_unsigned("==", bytes_, _all(_BACKSLASH))
    return builder.or_(builder.or_(quote, back), builder.icmp_unsigned("<", bytes_, _all(_SPACE)))


def _is_pair_mark(builder: Any, bytes_: Any) -> Any:
    equals = builder.icmp_unsigned("==", bytes_, _all(_EQUALS))
    quote = builder.icmp_unsigned("==", bytes_, _all(_QUOTE))
    return builder.or_(builder.or_(quote, equals), builder.icmp_unsigned("<=", bytes_, _all(_SPACE)))


marks = _hits(_is_mark)
pair_marks = _hits(_is_pair_mark)
gaps = _hits(lambda builder, bytes_: builder.icmp_unsigned("<=", bytes_, _all(_SPACE)))
newlines = _hits(lambda builder, bytes_: builder.icmp_unsigned("==", bytes_, _all(_NEWLINE)))
highs = _hits(lambda builder, bytes_: builder.icmp_unsigned(">=", bytes_, _all(_FIRST_HIGH)))


@intrinsic
def separators(_typing: Any, address: Any, delimiter: Any) -> Any:
    """Among 32 bytes the delimiters, quotes and newlines, as bits."""

    def generate(_context: Any, builder: Any, _signature: Any, arguments: Any) -> Any:
        bytes_ = _loaded(builder, arguments[0], _VECTOR, 1)
        one = builder.insert_element(ir.Constant(_VECTOR, ir.Undefined), builder.trunc(arguments[1], _BYTE), _FIRST)
        all_ = builder.shuffle_vector(one, one, ir.Constant(ir.VectorType(ir.IntType(32), 32), [0] * 32))
        quote = builder.icmp_unsigned("==", bytes_, _all(_QUOTE))
        newline = builder.icmp_unsigned("==", bytes_, _all(_NEWLINE))
        found = builder.or_(builder.or_(quote, newline), builder.icmp_unsigned("==", bytes_, all_))
        return builder.zext(builder.bitcast(found, ir.IntType(32)), _WORD)

    return types.uint64(types.int64, types.int64), generate


@intrinsic
def trailing_zeros(_typing: Any, bits: Any) -> Any:
    """Zero bits below the lowest one of a word that is not 0."""

    def generate(_context: Any, builder: Any, _signature: Any, arguments: Any) -> Any:
        return builder.cttz(arguments[0], ir.Constant(ir.IntType(1), 1))

    return types.int64(types.uint64), generate


@intrinsic
def ones(_typing: Any, bits: Any) -> Any:
    """How many bits of a word are set."""

    def generate(_context: Any, builder: Any, _signature: Any, arguments: Any) -> Any:
        return builder.ctpop(arguments[0])

    return types.int64(types.uint64), generate


@helper
def next_mark(p: Any) -> Any:
    """Place of the first quote, backslash or control character at or behind p; there must be one."""
    while True:
        hits = marks(p)
        if hits:
            return p + trailing_zeros(hits)
        p += 32


@helper
def next_pair_mark(p: Any) -> Any:
    """Place of the first space, control character, quote or equals sign at or behind p; there must be one."""
    while True:
        hits = pair_marks(p)
        if hits:
            return p + trailing_zeros(hits)
        p += 32


@helper
def next_gap(p: Any) -> Any:
    """Place of the first space or control character at or behind p; there must be one."""
    while True:
        hits = gaps(p)
        if hits:
            return p + trailing_zeros(hits)
        p += 32


@helper
def next_separator(p: Any, delimiter: Any) -> Any:
    """Place of the first delimiter, quote or newline at or behind p; there must be one."""
    while True:
        hits = separators(p, delimiter)
        if hits:
            return p + trailing_zeros(hits)
        p += 32


@helper
def next_newline(p: Any) -> Any:
    """Place of the first newline at or behind p; there must be one."""
    while True:
        hits = newlines(p)
        if hits:
            return p + trailing_zeros(hits)
        p += 32


@helper
def lowest(length: Any) -> Any:
    """A word whose lowest `length` bytes are all ones, 0 < length < 8."""
    return (np.uint64(1) << (np.uint64(length) << np.uint64(3))) - np.uint64(1)


@helper
def same_bytes(p: Any, length: Any, other: Any) -> Any:
    """Whether the bytes at p equal those at `other`, which are padded with zeros to whole words."""
    while length >= 8:
        if word(p) != word(other):
            return False
        p += 8
        other += 8
        length -= 8
    return length == 0 or word(p) & lowest(length) == word(other)


_ZEROS = np.uint64(0x3030303030303030)
_SIXES = np.uint64(0x0606060606060606)
_TENS = np.uint64(0xF0F0F0F0F0F0F0F0)


@helper
def digits_at(p: Any) -> Any:
    """How many digits stand at p, at most 8."""
    inner = word(p) ^ _ZEROS
    others = ((inner + _SIXES) | inner) & _TENS  # a carry can only disturb bytes behind the first that is no digit
    return trailing_zeros(others) >> 3 if others else np.int64(8)


@helper
def number_at(p: Any, digits: Any) -> Any:
    """The value of 1 to 8 digits at p, as uint64."""
    # Zeros come before them; then pairs, fours and the eight are joined, each step for all at once.
    eight = (word(p) - _ZEROS) << (np.uint64(8 - digits) << np.uint64(3))
    eight = eight * np.uint64(10) + (eight >> np.uint64(8))
    low, high = eight & np.uint64(0x000000FF000000FF), (eight >> np.uint64(16)) & np.uint64(0x000000FF000000FF)
    return (low * np.uint64(0x000F424000000064) + high * np.uint64(0x0000271000000001)) >> np.uint64(32)


@kernel
def survey(a: Any, until: Any) -> Any:
    """Newlines in a[:until], a uint8 array; as -1 - newlines when there are bytes that are not ASCII."""
    p = np.int64(a.ctypes.data)
    q, count, high = p + until, np.int64(0), np.uint64(0)
    while q - p >= 32:
        count += ones(newlines(p))
        high |= highs(p)
        p += 32
    while p < q:
        count += np.int64(byte(p) == 10)
        high |= np.uint64(byte(p) >> 7)
        p += 1
    return -1 - count if high else count


@kernel
def next_bad_text(a: Any, first: Any) -> Any:
    """Place of the first byte of a[first:] that is not UTF-8 (RFC 3629), -1 when there is none.

    Parameters: a, uint8, ends with a newline; first, the start of a character.
    """
    text = np.int64(a.ctypes.data)
    p, end = text + first, text + a.size
    while p < end:
        if end - p >= 32:
            hits = highs(p)
            if not hits:
                p += 32
                continue
            p += trailing_zeros(hits)
        length = _character(p)
        if length == 0:
            return p - text
        p += length
    return np.int64(-1)


@helper
def _character(p: Any) -> Any:
    """Bytes of the character at p, 0 when it is none."""
    c, d = byte(p), byte(p + 1)
    if c < 0x80:
        return 1
    if c < 0xC2 or c > 0xF4 or d & 0xC0 != 0x80:
        return 0
    if c < 0xE0:
        return 2
    if byte(p + 2) & 0xC0 != 0x80:
        return 0
    if c < 0xF0:  # no longer than needed, no half of a pair
        return 0 if (c == 0xE0 and d < 0xA0) or (c == 0xED and d > 0x9F) else 3
    if byte(p + 3) & 0xC0 != 0x80 or (c == 0xF0 and d < 0x90) or (c == 0xF4 and d > 0x8F):
        return 0
    return 4
