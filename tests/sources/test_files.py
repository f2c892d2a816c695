"""Following files through everything that happens to logs: each line delivered once, in order."""

from __future__ import annotations

import gzip
import os
import shutil
import tracemalloc
from pathlib import Path

import pytest

from tests.sources.follow import Reader, append, lines


@pytest.fixture
def log(tmp_path: Path) -> Path:
    return tmp_path / "a.log"


def pack(path: Path) -> None:
    """What gzip does to a file: the packed one appears, the plain one goes."""
    with gzip.open(f"{path}.gz", "wb") as packed:
        packed.write(path.read_bytes())
    path.unlink()


def test_a_growing_file_is_read_as_it_grows(log: Path) -> None:
    reader = Reader(log.parent)
    append(log, lines(0, 100))
    assert reader.read().got == lines(0, 100)
    append(log, lines(100, 130))
    assert reader.read().got == lines(0, 130)
    (status,) = reader.source.chains()
    assert status.at_end
    assert status.name == status.path == str(log)
    assert status.size == status.position == log.stat().st_size


def test_a_partial_last_line_waits_for_its_end(log: Path) -> None:
    first, second = lines(0, 2)
    append(log, [first, second[:10]])
    reader = Reader(log.parent).read()
    assert reader.got == [first]
    append(log, [second[10:]])
    assert reader.restart().read().got == [first, second]


def test_a_last_line_without_newline_counts_when_the_file_is_finished(log: Path) -> None:
    append(log, [*lines(0, 2), b"last"])
    reader = Reader(log.parent).read().finish()
    assert reader.got == [*lines(0, 2), b"last\n"]
    assert reader.finish().got == [*lines(0, 2), b"last\n"]
    assert reader.restart().read().finish().got == [*lines(0, 2), b"last\n"]


def test_rename_rotation_reads_the_rest_of_the_old_file_first(log: Path) -> None:
    append(log, lines(0, 50))
    reader = Reader(log.parent).read()
    append(log, lines(50, 80))
    log.rename(f"{log}.1")
    append(log, lines(80, 100))
    assert reader.read().got == lines(0, 100)
    assert {b.chain for b in reader.blocks} == {str(log)}
    assert [b.first for b in reader.blocks if b.data] == [True, False, True]


def test_a_writer_that_moves_over_late_loses_nothing(log: Path) -> None:
    append(log, lines(0, 50))
    reader = Reader(log.parent).read()
    log.rename(f"{log}.1")
    log.touch()  # the rotating program makes the new file; the writer still has the old one
    reader.read()
    append(Path(f"{log}.1"), lines(50, 70))
    reader.read()
    append(log, lines(70, 80))
    assert reader.read().got == lines(0, 80)


def test_a_last_line_without_newline_in_a_rotated_file(log: Path) -> None:
    append(log, [*lines(0, 5), b"unended"])
    reader = Reader(log.parent).read()
    log.rename(f"{log}.1")
    append(log, lines(5, 7))
    assert reader.read().got == [*lines(0, 5), b"unended\n", *lines(5, 7)]


def test_rotation_while_down(log: Path) -> None:
    append(log, lines(0, 50))
    reader = Reader(log.parent).read().stop()
    append(log, lines(50, 80))
    log.rename(f"{log}.1")
    append(log, lines(80, 100))
    assert reader.restart().read().got == lines(0, 100)


def test_copy_truncate(log: Path) -> None:
    append(log, lines(0, 50))
    reader = Reader(log.parent).read()
    shutil.copy(log, f"{log}.1")
    os.truncate(log, 0)
    append(log, lines(50, 60))
    assert reader.read().got == lines(0, 60)


def test_copy_truncate_finds_the_unread_rest_in_the_copy(log: Path) -> None:
    append(log, lines(0, 50))
    reader = Reader(log.parent).read()
    append(log, lines(50, 80))
    shutil.copy(log, f"{log}.1")
    os.truncate(log, 0)
    append(log, lines(80, 90))
    assert reader.read().got == lines(0, 90)
    assert reader.restart().read().got == lines(0, 90)


@pytest.mark.parametrize("down", [False, True])
def test_truncated_and_grown_past_the_position(log: Path, down: bool) -> None:
    append(log, lines(0, 50))
    reader = Reader(log.parent).read()
    if down:
        reader.stop()
    os.truncate(log, 0)
    append(log, lines(50, 250))
    if down:
        reader.restart()
    assert reader.read().got == lines(0, 250)


def test_a_truncation_that_loses_lines_is_told(log: Path) -> None:
    append(log, lines(0, 5000))
    reader = Reader(log.parent, limit=20_000)
    reader.take(reader.source.poll(20_000))
    read = len(reader.got)
    os.truncate(log, 0)
    append(log, lines(5000, 5010))
    reader.read()
    assert reader.got == [*lines(0, read), *lines(5000, 5010)]
    assert len([t for t in reader.troubles if "lost" in t]) == 1


def test_the_copy_is_not_counted_again_when_the_pattern_matches_it(log: Path) -> None:
    append(log, lines(0, 50))
    reader = Reader(log.parent, "a.log*").read()
    append(log, lines(50, 80))
    shutil.copy(log, f"{log}.1")
    reader.read()
    os.truncate(log, 0)
    append(log, lines(80, 90))
    assert reader.read().got == lines(0, 90)
    assert reader.restart().read().got == lines(0, 90)


def test_a_hole_of_nul_bytes_is_passed_over(log: Path) -> None:
    with open(log, "wb", buffering=0) as writer:  # no O_APPEND: it goes on at its old offset
        writer.write(b"".join(lines(0, 1000)))
        reader = Reader(log.parent).read()
        os.truncate(log, 0)
        writer.write(b"".join(lines(1000, 1100)))
        assert reader.read().got == lines(0, 1100)
    assert reader.rejected == {}
    append(log, [b"\0" * 5000, *lines(1100, 1110)])
    assert reader.read().got == lines(0, 1110)
    assert sum(b.holes for b in reader.blocks) >= 5000
    assert reader.restart().read().got == lines(0, 1110)


def test_room_taken_in_advance_is_not_passed_over(log: Path) -> None:
    with open(log, "wb", buffering=0) as writer:
        writer.write(lines(0, 1)[0] + b"\0" * 9000)
        reader = Reader(log.parent).read()
        writer.seek(len(lines(0, 1)[0]))
        writer.write(lines(1, 2)[0])
        assert reader.read().got == lines(0, 2)


@pytest.mark.parametrize("down", [False, True])
def test_a_symbolic_link_that_switches(tmp_path: Path, log: Path, down: bool) -> None:
    append(tmp_path / "day-01.txt", lines(0, 50))
    log.symlink_to("day-01.txt")
    reader = Reader(tmp_path).read()
    if down:
        reader.stop()
    append(tmp_path / "day-01.txt", lines(50, 70))
    append(tmp_path / "day-02.txt", lines(70, 80))
    (tmp_path / "new").symlink_to("day-02.txt")
    (tmp_path / "new").rename(log)
    if down:
        reader.restart()
    assert reader.read().got == lines(0, 80)


@pytest.mark.parametrize("pattern", ["a.log", "a.log*"])
def test_two_rotations_and_compression_while_down(log: Path, pattern: str) -> None:
    append(log, lines(0, 100))
    reader = Reader(log.parent, pattern).read().stop()
    append(log, lines(100, 150))
    log.rename(f"{log}.2")
    append(log, lines(150, 250))
    log.rename(f"{log}.1")
    pack(Path(f"{log}.1"))
    pack(Path(f"{log}.2"))
    append(log, lines(250, 260))
    reader.restart().take(reader.source.poll(1 << 20))
    for _ in range(3):
        reader.restart().read()
    assert reader.got == lines(0, 260)


def test_two_rotations_between_two_polls(log: Path) -> None:
    append(log, lines(0, 10))
    reader = Reader(log.parent).read()
    append(log, lines(10, 20))
    log.rename(f"{log}.2")
    append(log, lines(20, 30))
    log.rename(f"{log}.1")
    append(log, lines(30, 40))
    assert reader.read().got == lines(0, 40)


def test_dates_behind_the_name_are_read_oldest_first(log: Path) -> None:
    append(log, lines(0, 10))
    reader = Reader(log.parent).read().stop()
    append(log, lines(10, 20))
    log.rename(f"{log}-20261130")
    append(log, lines(20, 30))
    log.rename(f"{log}-20261201")
    append(log, lines(30, 40))
    assert reader.restart().read().got == lines(0, 40)


def test_rotated_files_that_the_pattern_asks_for_come_first(log: Path) -> None:
    append(Path(f"{log}.2"), lines(0, 10))
    pack(Path(f"{log}.2"))
    append(Path(f"{log}.1"), lines(10, 20))
    append(log, lines(20, 30))
    reader = Reader(log.parent, "a.log*").read()
    assert reader.got == lines(0, 30)
    assert [c.name for c in reader.source.chains()] == [str(log)]
    Path(f"{log}.2.gz").rename(f"{log}.3.gz")
    Path(f"{log}.1").rename(f"{log}.2")
    log.rename(f"{log}.1")
    append(log, lines(30, 40))
    assert reader.read().got == lines(0, 40)
    assert reader.restart().read().got == lines(0, 40)


def test_a_rotated_name_that_fits_the_pattern_is_not_a_new_file(tmp_path: Path) -> None:
    north = tmp_path / "orders-north.jsonl"
    append(north, lines(0, 10))
    reader = Reader(tmp_path, "orders-*.jsonl").read()
    for name in ("orders-north-20261201.jsonl", "orders-north-yesterday.jsonl"):
        north.rename(tmp_path / name)
        n = len(reader.got)
        append(north, lines(n, n + 10))
        reader.read()
        assert reader.got == lines(0, n + 10)
        assert reader.restart().read().got == lines(0, n + 10)


def test_an_inode_used_again(log: Path) -> None:
    append(log, lines(0, 50))
    reader = Reader(log.parent).read().stop()
    old = log.stat().st_ino
    spare = []
    for i in range(200):  # the file system decides; try until it hands the number out again
        log.unlink(missing_ok=True)
        append(log, lines(50, 150))
        if log.stat().st_ino == old:
            break
        spare.append(log.rename(log.parent / f"spare{i}"))
    if not log.exists():
        append(log, lines(50, 150))
    assert reader.restart().read().got == lines(0, 150)


def test_files_that_share_their_first_line(log: Path) -> None:
    header = b"dock,units\n"
    append(log, [header, *lines(0, 50)])
    reader = Reader(log.parent, "a.log*").read()
    log.rename(f"{log}.1")
    append(log, [header, *lines(50, 90)])
    reader.read()
    Path(f"{log}.1").rename(f"{log}.2")
    log.rename(f"{log}.1")
    append(log, [header, *lines(90, 100)])
    reader.read()
    assert [g for g in reader.got if g != header] == lines(0, 100)
    assert reader.got.count(header) == 3
    assert {b.header for b in reader.blocks if b.data} == {b"dock,units"}


@pytest.mark.parametrize("down", [False, True])
@pytest.mark.parametrize("again", [False, True])
def test_a_header_outlives_a_cut_in_place(log: Path, down: bool, again: bool) -> None:
    """A writer that keeps its file open does not write the columns' names again after a copy-and-cut."""
    header = [b"n,units\n"]
    append(log, [*header, b"1,5\n"])
    reader = Reader(log.parent).read()
    if down:
        reader.stop()
    append(log, [b"2,6\n"])
    shutil.copy(log, f"{log}.1")
    os.truncate(log, 0)
    append(log, [*(header if again else []), b"3,7\n"])
    if down:
        reader.restart()
    reader.read()
    last = [b for b in reader.blocks if b.data][-1]
    assert (last.header, last.first, last.offset) == (b"n,units", again, 0)
    append(log, [b"4,8\n"])
    reader.restart().read()
    last = [b for b in reader.blocks if b.data][-1]
    assert (last.header, last.first, last.data) == (b"n,units", False, b"4,8\n")
    log.rename(f"{log}.2")
    append(log, [b"units,n\n", b"9,5\n"])
    last = [b for b in reader.read().blocks if b.data][-1]
    assert (last.header, last.first) == (b"units,n", True)


def test_all_lines_the_same(log: Path) -> None:
    append(log, lines(0, 1) * 500)
    reader = Reader(log.parent, "a.log*").read()
    log.rename(f"{log}.1")
    append(log, lines(0, 1) * 600)
    assert reader.read().got == lines(0, 1) * 1100
    assert reader.restart().read().got == lines(0, 1) * 1100


def test_two_names_of_one_file(log: Path) -> None:
    append(log, lines(0, 50))
    os.link(log, log.parent / "b.log")
    reader = Reader(log.parent, "*.log", "a*").read()
    assert reader.got == lines(0, 50)
    assert [c.name for c in reader.source.chains()] == [str(log)]
    assert reader.restart().read().got == lines(0, 50)


def test_replaced_by_a_longer_copy_of_itself(log: Path) -> None:
    append(log, lines(0, 50))
    reader = Reader(log.parent).read()
    append(log.parent / "n", lines(0, 80))
    (log.parent / "n").rename(log)
    assert reader.read().got == lines(0, 80)


def test_carriage_returns_stay_for_the_parser(log: Path) -> None:
    crlf = [line[:-1] + b"\r\n" for line in lines(0, 50)]
    append(log, crlf)
    reader = Reader(log.parent).read()
    assert b"".join(reader.got) == b"".join(crlf)
    assert not reader.blocks[0].header.endswith(b"\r")


@pytest.mark.parametrize("limit", [4096, 1 << 16, 1 << 20])
def test_over_long_lines_are_refused_the_same_whatever_the_blocks(log: Path, limit: int) -> None:
    long = b"x" * 10_001 + b"\n"
    append(log, [*lines(0, 10), long, long, *lines(10, 20), b"y" * 10_000 + b"\n", b"z" * 300_000 + b"\n"])
    append(log, [*lines(20, 30), b"w" * 20_000])
    reader = Reader(log.parent, max_line=10_000, limit=limit).read()
    assert reader.got == [*lines(0, 20), b"y" * 10_000 + b"\n", *lines(20, 30)]
    assert reader.rejected == {"over-long line": 4}
    refused = [b for b in reader.blocks if b.rejected]
    assert [b.offset for b in refused][:2] == [len(b"".join(lines(0, 10))), len(b"".join(lines(0, 10))) + 10_002]
    assert refused[2].rejected[0].text == b"z" * 200
    append(log, [b"w\n", *lines(30, 31)])
    assert reader.restart().read().got[-1:] == lines(30, 31)
    assert reader.rejected == {"over-long line": 4}


def test_an_endless_line_needs_little_memory(log: Path) -> None:
    with open(log, "wb") as file:
        file.write(b"".join(lines(0, 10)))
        for _ in range(64):
            file.write(b"x" * (1 << 20))
        file.write(b"\n" + b"".join(lines(10, 20)))
    reader = Reader(log.parent, limit=1 << 20)
    tracemalloc.start()
    reader.read()
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert reader.got == lines(0, 20)
    assert reader.rejected == {"over-long line": 1}
    assert peak < 8 << 20


def test_a_half_written_compressed_file_is_waited_for(log: Path) -> None:
    append(log, lines(0, 1000))
    reader = Reader(log.parent).read().stop()
    whole = gzip.compress(b"".join(lines(0, 1500)), mtime=0)
    log.unlink()
    packed = Path(f"{log}.1.gz")
    packed.write_bytes(whole[: len(whole) // 2])
    append(log, lines(1500, 1510))
    reader.restart().read()
    assert reader.got == lines(0, 1000)
    assert any("complete" in t for t in reader.troubles)
    packed.write_bytes(whole)
    assert reader.read().got == lines(0, 1510)


def test_a_compressed_file_that_never_gets_complete_is_given_up(log: Path) -> None:
    append(log, lines(0, 1000))
    reader = Reader(log.parent).read().stop()
    log.unlink()
    Path(f"{log}.1.gz").write_bytes(gzip.compress(b"".join(lines(0, 1500)))[:1000])
    append(log, lines(1500, 1510))
    reader.restart().read(quiet=100)
    assert reader.got == [*lines(0, 1000), *lines(1500, 1510)]
    assert any("lost" in t for t in reader.troubles)


def test_compressed_files_by_pattern(tmp_path: Path) -> None:
    (tmp_path / "one.log.gz").write_bytes(gzip.compress(b"".join(lines(0, 30))))
    half = gzip.compress(b"".join(lines(30, 2000)) + b"end")
    (tmp_path / "two.log.gz").write_bytes(half[:500])
    (tmp_path / "three.log.zst").write_bytes(b"(\xb5/\xfd")
    reader = Reader(tmp_path, "*.log.*").read()
    assert reader.got[:30] == lines(0, 30)
    assert any("three.log.zst" in t and "gzip" in t for t in reader.troubles)
    (tmp_path / "two.log.gz").write_bytes(half)
    reader.read().restart().read()
    assert sorted(reader.got) == sorted([*lines(0, 2000), b"end\n"])


def test_files_that_appear_later(tmp_path: Path) -> None:
    reader = Reader(tmp_path, "*.log", "deep/**/*.txt").read()
    append(tmp_path / "b.log", lines(0, 10))
    reader.read()
    append(tmp_path / "c.log", lines(10, 30))
    (tmp_path / "deep/er").mkdir(parents=True)
    append(tmp_path / "deep/er/d.txt", lines(30, 40))
    assert reader.read().got == lines(0, 40)
    assert len(reader.source.chains()) == 3


def test_a_file_that_vanishes_and_returns(log: Path) -> None:
    append(log, [*lines(0, 10), b"half"])
    reader = Reader(log.parent).read()
    log.unlink()
    reader.read()
    assert reader.got == [*lines(0, 10), b"half\n"]
    append(log, lines(10, 20))
    assert reader.read().got == [*lines(0, 10), b"half\n", *lines(10, 20)]


def test_a_file_moved_away_and_back(log: Path) -> None:
    append(log, lines(0, 10))
    reader = Reader(log.parent).read().stop()
    away = log.parent / "elsewhere"
    log.rename(away)
    reader.restart().read()
    append(away, lines(10, 15))
    away.rename(log)
    assert reader.read().got == lines(0, 15)


def test_what_cannot_be_read_is_told_once_and_the_rest_goes_on(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    append(tmp_path / "a.log", lines(0, 10))
    append(tmp_path / "b.log", lines(10, 20))
    (tmp_path / "c.log").mkdir()
    os.mkfifo(tmp_path / "d.log")
    real = os.open

    def refusing(path: str, *args: int, **more: int) -> int:
        if str(path).endswith("a.log"):
            raise PermissionError(13, "Permission denied", path)
        return real(path, *args, **more)

    monkeypatch.setattr(os, "open", refusing)  # the tests may run as root, whom nobody refuses
    reader = Reader(tmp_path, "*.log").read().read()
    assert reader.got == lines(10, 20)
    assert len([t for t in reader.troubles if "a.log: cannot be read: permission denied" in t]) == 1
    assert len([t for t in reader.troubles if "c.log: is a folder" in t]) == 1
    assert len([t for t in reader.troubles if "d.log: is no regular file" in t]) == 1
    monkeypatch.undo()
    assert reader.read().got == [*lines(10, 20), *lines(0, 10)]


def test_a_pattern_without_files_is_told_once(log: Path) -> None:
    reader = Reader(log.parent, "a.log", "b-*.log").read()
    assert [t.split(": ")[1][:12] for t in reader.troubles] == ["no such file"] * 2
    append(log, lines(0, 10))
    assert len(reader.read().troubles) == 2
    log.unlink()
    log.mkdir()
    reader.read().read()
    assert len(reader.troubles) == 3
    assert "not a regular file" in reader.troubles[-1]
    assert reader.got == lines(0, 10)


def test_many_files_take_turns(tmp_path: Path) -> None:
    for i in range(5):
        append(tmp_path / f"f{i}.log", lines(i * 20_000, i * 20_000 + 20_000))
    reader = Reader(tmp_path, "*.log")
    seen = []
    for _ in range(10):
        blocks = reader.source.poll(300_000)
        assert sum(len(b.data) for b in blocks) <= 300_000 + 4096  # about
        seen += [b.chain for b in blocks]
        reader.take(blocks)
    assert len(set(seen)) == 5
    reader.read()
    assert sorted(reader.got) == sorted(lines(0, 100_000))


def test_more_files_than_may_be_open(tmp_path: Path) -> None:
    for i in range(230):
        append(tmp_path / f"f{i:03}.log", lines(2 * i, 2 * i + 1))
    before = len(os.listdir("/dev/fd"))
    reader = Reader(tmp_path, "*.log").read()
    assert len(os.listdir("/dev/fd")) - before <= 200
    assert {(c.at_end, c.size - c.position) for c in reader.source.chains()} == {(True, 0)}
    for i in range(230):
        append(tmp_path / f"f{i:03}.log", lines(2 * i + 1, 2 * i + 2))
    assert sorted(reader.read().got) == sorted(lines(0, 460))


def test_a_bookmark_of_any_block_resumes_exactly(log: Path) -> None:
    append(log, lines(0, 300))
    reader = Reader(log.parent, limit=4096)
    reader.read()
    whole = b"".join(lines(0, 300))
    for block in [b for b in reader.blocks if b.data]:
        again = Reader(log.parent)
        again.stop()
        again.bookmarks = {block.chain: block.bookmark}
        again.restart().read()
        assert b"".join(again.got) == whole[block.offset + len(block.data) :]


def test_writers_that_move_over_one_after_the_other(log: Path) -> None:
    """Two processes share a log: the first has moved over, the second still writes a line to the old file."""
    append(log, lines(0, 50))
    reader = Reader(log.parent).read()
    log.rename(f"{log}.1")
    append(log, lines(60, 70))
    reader.take(reader.source.poll(1 << 20))
    append(Path(f"{log}.1"), lines(50, 60))
    assert reader.read().got == lines(0, 70)


def test_an_equal_end_is_not_an_equal_file(log: Path) -> None:
    """Another file with the same 256 bytes before the position: only its first line tells it apart."""
    same = b"".join(lines(0, 50))
    append(log, [b"first\n", same])
    reader = Reader(log.parent).read().stop()
    log.unlink()
    append(log, [b"other\n", same, *lines(50, 60)])
    assert reader.restart().read().got[51:] == [b"other\n", *lines(0, 60)]
