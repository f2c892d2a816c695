"""Cutting raw bytes into lines: the outcome never depends on how the bytes came in pieces."""

from __future__ import annotations

from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.sources.cutting import take

MAX_LINE = 12

pieces = st.sampled_from([b"a", b"bc", b"\n", b"\0", b"\0\0\0", b"x" * 11, b"y" * 12, b"z" * 13, b"w" * 40, b"\r\n"])
streams = st.lists(pieces, max_size=30).map(b"".join)


def plain(data: bytes) -> tuple[list[bytes], int, int]:
    """Lines, over-long lines and NUL bytes passed over, by the rules in words."""
    parts = data.split(b"\n")
    kept, refused, holes = [], 0, 0
    for i, part in enumerate(parts):
        line = part.lstrip(b"\0")
        holes += len(part) - len(line)
        if i + 1 == len(parts) and not line:
            continue  # nothing stands behind the last newline
        if len(line) > MAX_LINE:
            refused += 1
        else:
            kept.append(line + b"\n")
    return kept, refused, holes


@settings(max_examples=600, derandomize=True, deadline=None)
@given(streams, st.lists(st.integers(1, 30), min_size=1, max_size=20))
def test_any_pieces_give_the_same_lines(data: bytes, sizes: list[int]) -> None:
    kept: list[bytes] = []
    refused = holes = at = turn = 0
    skipping = False
    shown = 0  # bytes of data that have arrived
    while True:
        shown = min(len(data), shown + sizes[turn % len(sizes)])
        turn += 1
        final = shown == len(data)
        while True:
            taken = take(data[at:shown], skipping=skipping, max_line=MAX_LINE, final=final)
            if not taken.consumed:
                break
            assert data[at + taken.start :].startswith(taken.data[:-1])
            kept += [line + b"\n" for line in taken.data.split(b"\n")[:-1]]
            refused += taken.refused is not None
            holes += taken.holes
            at += taken.consumed
            skipping = taken.skipping
        if final:
            break
    assert at == len(data)
    assert (kept, refused, holes) == plain(data)
