"""The desk: one array of int64 on which a run does its work. These are places on it, in bytes.

What a format needs of its own starts at OWN; formats do not share a desk.
"""

from __future__ import annotations

FIELDS = 3
SIZE, TIME, STREAM = 0, 1, 2
NO_FIELD = FIELDS
TEXT, NUMBER = 0, 1
"""What a field was: a text between two places, or a number."""

FORMAT = 0
JSON, CSV, PAIRS, COMBINED = 0, 1, 2, 3
EVERYTHING = 8  # mask of the wanted fields
UNIT = 16  # ns of one unit of numeric times, 0: each by its magnitude
LOCAL_IS_UTC = 24
SCALE = 32
TABLE = 40  # three words: the number of this run, the slots of the table of names, the names it may hold
PERIOD = 64  # three words: the beginning of the stamp read before, and the seconds that it stands for
END = 88  # where the newline of the line just read is
OUT = 96  # of each field three words: start and end of its text, or its number; and what it was
POWERS_OF_TEN = OUT + 24 * (FIELDS + 1)
POWERS = 23
"""Powers of ten that a double holds exactly: 10^0 to 10^22."""
OWN = POWERS_OF_TEN + 8 * POWERS
