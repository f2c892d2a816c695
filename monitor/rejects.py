"""Why a line cannot be used: the reasons in plain words, and one rejected line as evidence.

Both the reading of places (monitor.sources) and the reading of lines (monitor.parse) reject, so the
words stand here, below both. The reasons are stored and shown; changing one changes stored accounts.
"""

from __future__ import annotations

import msgspec

SAMPLE_BYTES = 200
"""Bytes kept of a rejected line."""

# Rejected by a source.
OVER_LONG = "over-long line"
UNENDED = "line not ended by its sender"

# Rejected by every format, in the order in which they are judged after the format's own reasons.
NOT_UTF8 = "not UTF-8"
FIELD_MISSING = "field missing"
NOT_A_NUMBER = "not a number"
NOT_FINITE = "not finite"
ZERO = "zero"
NEGATIVE = "negative"
NO_TIME = "no usable time"
BAD_STREAM = "stream name unusable"

# Rejected because the line is not of its format.
NOT_JSON = "not JSON"
TOO_DEEP = "nested too deep"
NOT_CSV = "not CSV"
WRONG_COLUMNS = "wrong number of columns"
NOT_COMBINED = "not a combined log line"
NOT_PAIRS = "not key=value pairs"
NO_MATCH = "pattern does not match"
TOO_LONG_FOR_PATTERN = "too long for a pattern"

# Skipped: nothing is wrong with the line, but it is no event.
BLANK = "blank"
HEADER = "header"
CONDITION = "condition"


class Rejected(msgspec.Struct, frozen=True):
    """One line that could not be used.

    reason  one of the reasons of this module
    offset  byte offset of the line inside its block (may be negative for a source's own: before it)
    text    the first bytes of the line as they came, at most SAMPLE_BYTES; may hold anything
    """

    reason: str
    offset: int
    text: bytes
