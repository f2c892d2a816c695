"""Reading a pipe: whole lines as they come, the end told once."""

from __future__ import annotations

import os
from collections.abc import Iterator
from pathlib import Path

import pytest

from monitor.sources import ReadStandardInput, open_source
from monitor.sources.source import Block
from tests.sources.follow import lines


@pytest.fixture
def pipe() -> Iterator[tuple[int, int]]:
    ends = os.pipe()
    yield ends
    for end in ends:
        try:
            os.close(end)
        except OSError:
            continue


def data(blocks: list[Block]) -> bytes:
    return b"".join(b.data for b in blocks)


def test_lines_arrive_when_they_are_whole_and_the_end_is_told_once(pipe: tuple[int, int]) -> None:
    out, into = pipe
    source = open_source(ReadStandardInput(fileno=out), {})
    assert source.poll(1000) == []
    os.write(into, b"a,b\r\n1,2\n3,")
    (block,) = source.poll(1000)
    assert (block.chain, block.data, block.offset, block.first, block.header) == ("-", b"a,b\r\n1,2\n", 0, True, b"a,b")
    assert not block.ended
    os.write(into, b"4\n5")
    (block,) = source.poll(1000)
    assert (block.data, block.offset, block.first, block.header) == (b"3,4\n", 9, False, b"a,b")
    os.close(into)
    blocks = source.poll(1000)
    assert data(blocks) == b"5\n"
    assert [b.ended for b in blocks] == [False, True]
    assert source.poll(1000) == []
    (status,) = source.chains()
    assert status.at_end


def test_finish_gives_what_has_arrived(pipe: tuple[int, int]) -> None:
    out, into = pipe
    source = open_source(ReadStandardInput(fileno=out), {})
    os.write(into, b"1\n2")
    assert data(source.poll(1000)) == b"1\n"
    assert data(source.finish()) == b"2\n"
    assert source.finish() == []


def test_a_redirected_file_is_read_in_portions(tmp_path: Path) -> None:
    path = tmp_path / "in"
    path.write_bytes(b"".join(lines(0, 1000)))
    with open(path, "rb") as file:
        source = open_source(ReadStandardInput(fileno=file.fileno()), {})
        blocks = []
        while not (blocks and blocks[-1].ended):
            got = source.poll(5000)
            assert len(data(got)) <= 5000
            blocks += got
    assert data(blocks) == path.read_bytes()
    assert [b.offset for b in blocks[:-1]] == [sum(len(c.data) for c in blocks[:i]) for i in range(len(blocks) - 1)]


@pytest.mark.parametrize("limit", [100, 2000, 100_000])
def test_an_over_long_line_is_refused_without_being_held(tmp_path: Path, limit: int) -> None:
    path = tmp_path / "in"
    path.write_bytes(b"1\n" + b"x" * 50_000 + b"\n2\n" + b"y" * 1000 + b"\n3\n" + b"z" * 1001)
    with open(path, "rb") as file:
        source = open_source(ReadStandardInput(fileno=file.fileno(), max_line=1000), {})
        blocks: list[Block] = []
        while not (blocks and blocks[-1].ended):
            blocks += source.poll(limit)
    assert data(blocks) == b"1\n2\n" + b"y" * 1000 + b"\n3\n"
    assert sum(b.rejected_counts.get("over-long line", 0) for b in blocks) == 2


def test_a_closed_descriptor_is_told_and_ends(pipe: tuple[int, int]) -> None:
    out, _ = pipe
    os.close(out)
    source = open_source(ReadStandardInput(fileno=out), {})
    blocks = source.poll(1000)
    assert blocks[-1].ended
    assert "cannot be read" in source.troubles()[0]
    assert source.troubles() == []
