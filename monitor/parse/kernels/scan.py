"""The compiled pass over a block: each line is settled, or left to the readers in monitor.parse.

Settled are lines that are plain in every respect. A line that is not settled is not refused: it only takes the
slower way, which also finds the reason if there is one. So this pass may be as narrow as it likes, but must never
settle a line differently from that way.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from monitor.parse.kernels.compiling import helper, kernel
from monitor.parse.kernels.desk import (
    END,
    EVERYTHING,
    FORMAT,
    JSON,
    LOCAL_IS_UTC,
    NUMBER,
    OUT,
    PERIOD,
    SCALE,
    SIZE,
    STREAM,
    TABLE,
    TEXT,
    TIME,
    UNIT,
)  # fmt: skip
from monitor.parse.kernels.json_scan import json_line
from monitor.parse.kernels.scalars import epoch, name_code, stamp
from monitor.parse.kernels.text_scan import text_line
from monitor.parse.kernels.words import kept, kept_float, next_newline

SETTLED, DOUBTFUL = 0, 1


@helper
def _time(desk: Any) -> Any:
    """ns of the time that the line just read holds, -1 in doubt."""
    out, unit = desk + OUT + 24 * TIME, kept(desk + UNIT)
    if kept(out + 16) == TEXT:
        return stamp(kept(out), kept(out + 8), unit, kept(desk + LOCAL_IS_UTC) != 0, desk + PERIOD)
    return epoch(kept(out), unit)


@kernel
def scan(a: Any, until: Any, desk_array: Any, names_array: Any, outputs: Any) -> Any:
    """Read the lines in front of a[until], which is the start of a line or the end of the text.

    Parameters: a, uint8, with SPARE bytes behind a[until]; desk_array, int64, see desk; names_array, int64, see
    name_code; outputs, (starts, ends, status, sizes, stamps, codes), are filled in for each line, the last three
    only where status is SETTLED; the sizes are scaled.
    Returns the number of distinct stream names, whose places (addresses) are in names_array.
    """
    starts, ends, statuses, sizes, stamps, codes = outputs
    desk, names, text = np.int64(desk_array.ctypes.data), np.int64(names_array.ctypes.data), np.int64(a.ctypes.data)
    wanted, scale, json = kept(desk + EVERYTHING), kept_float(desk + SCALE), kept(desk + FORMAT) == JSON
    timed, named = wanted >> TIME & 1, wanted >> STREAM & 1
    known, layout, when, code = np.int64(0), np.int64(0), np.int64(0), np.int64(0)
    p, n = text, np.uint64(0)
    while p < text + until:
        starts[n] = p - text
        status = np.uint8(DOUBTFUL)
        used = json_line(p, layout, desk) if json else text_line(p, desk)
        if used < 0:
            e = next_newline(p)
        else:
            e, layout = kept(desk + END), used
            size = kept_float(desk + OUT + 24 * SIZE) * scale
            plain = kept(desk + OUT + 24 * SIZE + 16) == NUMBER and 0.0 < size < np.inf
            if plain and timed:
                when = _time(desk)
                plain = when >= 0
            if plain and named:
                out = desk + OUT + 24 * STREAM
                code = name_code(kept(out), kept(out + 8), names, known, desk + TABLE)
                plain = code >= 0
                known = max(known, code + 1)
            if plain:
                sizes[n], stamps[n], codes[n] = size, when, code
                status = np.uint8(SETTLED)
        ends[n] = e - text
        statuses[n] = status
        n += np.uint64(1)
        p = e + 1
    return known
