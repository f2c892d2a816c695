"""Where the parts of many web-server log lines stand, found by their spaces, brackets and quotes.

Only lines of the plain shape are found: host ident user [time] "method path protocol" status bytes, then the
end or a space; no backslash, no control character. The others are left to the one-by-one reader.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from monitor.parse.blocks import Cut

_STATUS = 5  # from the quote behind the request to the space behind the status: `" 200 `


@dataclass(frozen=True, slots=True)
class LogPlaces:
    """Which lines have the plain shape, and for each part its starts and ends, int64 (n,)."""

    good: NDArray[np.bool_]
    starts: dict[str, NDArray[np.int64]]
    ends: dict[str, NDArray[np.int64]]


def log_places(cut: Cut) -> LogPlaces:
    """Find the parts of every line."""
    array, line_ends = cut.bytes_, cut.bare_ends()
    spaces, quotes = _padded(array == 32), _padded(array == ord('"'))
    word, quote = np.searchsorted(spaces, cut.starts), np.searchsorted(quotes, cut.starts)
    gaps = [_at(spaces, word + k) for k in range(3)]
    opening, closing = _at(quotes, quote), _at(quotes, quote + 1)
    before_request = np.searchsorted(spaces, opening)
    in_request = [_at(spaces, before_request + k) for k in range(2)]
    # The plain request holds two spaces, the next one follows the closing quote, then one behind the status.
    behind_status = _at(spaces, before_request + 3)
    bytes_end = np.minimum(_at(spaces, before_request + 4), line_ends)
    good = (closing < line_ends) & (gaps[2] < opening) & (opening - gaps[2] >= 5)
    good &= (gaps[0] > cut.starts) & (gaps[1] > gaps[0] + 1) & (gaps[2] > gaps[1] + 1)
    good &= (in_request[1] < closing) & (_at(spaces, before_request + 2) == closing + 1)
    good &= (behind_status == closing + _STATUS) & (bytes_end > behind_status + 1) & (behind_status < line_ends)
    safe = np.where(good, closing, 0)
    last = array.size - 1
    for k in (2, 3, 4):
        good &= (array[np.minimum(safe + k, last)] - np.uint8(48)) <= 9
    good &= ~_strange(cut)
    time_start, time_end = gaps[2] + 2, opening - 2
    good &= _is(array, gaps[2] + 1, "[") & _is(array, time_end, "]") & _is(array, opening - 1, " ")
    brackets = _padded(array == ord("]"))
    good &= _at(brackets, np.searchsorted(brackets, time_start)) == time_end  # the first one ends the time
    starts = {"host": cut.starts, "ident": gaps[0] + 1, "user": gaps[1] + 1, "time": time_start}
    ends = {"host": gaps[0], "ident": gaps[1], "user": gaps[2], "time": time_end}
    starts |= {"request": opening + 1, "method": opening + 1, "path": in_request[0] + 1, "protocol": in_request[1] + 1}
    ends |= {"request": closing, "method": in_request[0], "path": in_request[1], "protocol": closing}
    starts |= {"status": closing + 2, "bytes": behind_status + 1}
    ends |= {"status": behind_status, "bytes": bytes_end}
    return LogPlaces(good, starts, ends)


def _padded(hits: NDArray[np.bool_]) -> NDArray[np.int64]:
    """Places of hits, and behind them a place beyond everything, so that looking further is harmless."""
    return np.append(np.flatnonzero(hits), np.int64(1) << 60)


def _at(marks: NDArray[np.int64], index: NDArray[np.int64]) -> NDArray[np.int64]:
    return np.asarray(marks[np.minimum(index, marks.size - 1)], np.int64)


def _is(array: NDArray[np.uint8], at: NDArray[np.int64], char: str) -> NDArray[np.bool_]:
    inside = (at >= 0) & (at < array.size)
    return np.asarray(inside & (array[np.where(inside, at, 0)] == ord(char)), np.bool_)


def _strange(cut: Cut) -> NDArray[np.bool_]:
    """Lines with a backslash or a control character (a carriage return at the end is none)."""
    array = cut.bytes_
    strange = np.flatnonzero((array < 32) & (array != 10) | (array == ord("\\")))
    hit = np.zeros(cut.ends.size, bool)
    if strange.size:
        line = np.searchsorted(cut.ends, strange)
        inner = (array[strange] != 13) | (strange + 1 != cut.ends[line])
        hit[line[inner]] = True
    return hit
