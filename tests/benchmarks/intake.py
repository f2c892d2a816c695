"""Speed of reading lines, as ratios against a bare json.loads loop in the same run.

    python -m tests.benchmarks.intake [lines]

Each format is read clean and with one line in a hundred broken, three fields each (size, time, stream), in
blocks of about 1 MiB. The yardstick is `for line in file: json.loads(line)` on the clean JSON lines; rounds
alternate between all candidates, and the best round of each counts, in processor time, so that a busy machine
disturbs little.
"""

from __future__ import annotations

import io
import json
import random
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

from monitor.parse import LineFormat, Parser, compile_parser, warm_parsers
from monitor.sources import FollowFiles, open_source

ROUNDS = 5
BLOCK = 1 << 20
FORMATS = {
    "json": LineFormat(lines="json", size="units", time="placed_at", stream=("dock",)),
    "csv": LineFormat(lines="csv", size="units", time="placed_at", stream=("dock",)),
    "pairs": LineFormat(lines="pairs", size="units", time="placed_at", stream=("dock",)),
    "combined": LineFormat(lines="combined", size="bytes", time="time", stream=("method",)),
    "number": LineFormat(lines="number"),
    "pattern": LineFormat(
        lines="pattern",
        size="u",
        time="t",
        stream=("d",),
        pattern=r"^(?P<t>[^ ]+) [^ ]+ (?P<d>[^ ]+) units=(?P<u>[^ ]+)",
    ),
}
DOCKS = ("north-dock", "south-dock", "east-dock", "west-dock")


def one_line(name: str, i: int, units: float, dock: str) -> str:
    """A line of a format; JSON lines have 143 bytes."""
    second = i // 50 % 86400
    clock = f"{second // 3600:02}:{second // 60 % 60:02}:{second % 60:02}"
    at = f"2026-12-01T{clock}.{i % 1000:03}Z"
    if name == "json":
        text = f'{{"order":{i:08},"placed_at":"{at}","dock":"{dock}","units":{units:.2f},"note":"'
        text = text.replace(f'"order":{i:08}', f'"order":{10_000_000 + i}')
        return text.ljust(141, "x") + '"}'
    if name == "csv":
        return f"{i},{at},{dock},{units:.2f},handled by hand"
    if name == "pairs":
        return f"level=info placed_at={at} order={i} dock={dock} units={units:.2f} by=hand"
    if name == "combined":
        stamp = f"01/Dec/2026:{clock} +0000"
        return f'10.0.0.{i % 250} - - [{stamp}] "GET /parts/{i % 977} HTTP/1.1" 200 {units:.0f} "-" "client/1.0 (shop)"'
    return f"{units:.2f}" if name == "number" else f"{at} info {dock} units={units:.2f}"


def block_of(name: str, n: int, bad: float) -> bytes:
    """n lines of a format; a share of them broken."""
    chance = random.Random(7)
    out = ["order,placed_at,dock,units,remark"] if name == "csv" else []
    for i in range(n):
        line = one_line(name, i, 20 * chance.paretovariate(1.5), chance.choice(DOCKS))
        if chance.random() < bad:
            line = chance.choice([line[: len(line) // 2], "", line.replace(".", "!"), "\t" + line + '"'])
        out.append(line)
    return "\n".join([*out, ""]).encode()


def blocks(data: bytes) -> list[bytes]:
    """Cut into blocks of whole lines of about BLOCK bytes."""
    out, at = [], 0
    while at < len(data):
        end = data.rfind(b"\n", at, at + BLOCK) + 1
        out.append(data[at:end])
        at = end
    return out


def bare(data: bytes) -> Callable[[], None]:
    def run() -> None:
        for line in io.BytesIO(data):
            json.loads(line)

    return run


def newlines(data: bytes) -> Callable[[], None]:
    return lambda: [b.count(b"\n") for b in blocks(data)] and None


def parse_all(parser: Parser, parts: list[bytes], header: bytes | None) -> Callable[[], None]:
    def run() -> None:
        for i, part in enumerate(parts):
            parser.parse(part, header=header, first=i == 0)

    return run


def follow(data: bytes, folder: Path) -> Callable[[], None]:
    """The same lines through a followed file, unparsed."""
    (folder / "a.log").write_bytes(data)

    def run() -> None:
        source = open_source(FollowFiles(patterns=("a.log",), base=folder), {})
        while source.poll(BLOCK):
            continue
        source.close()

    return run


def main(n: int, folder: Path) -> None:
    """Measure and print the table."""
    warm_parsers()
    clean = block_of("json", n, 0)
    runs: dict[str, tuple[Callable[[], None], int]] = {"bare json.loads": (bare(clean), n)}
    runs["count newlines"] = (newlines(clean), n)
    runs["follow a file"] = (follow(clean, folder), n)
    for name, format_ in FORMATS.items():
        for label, bad in (("clean", 0.0), ("1 % bad", 0.01)):
            data = block_of(name, n, bad)
            header = data.split(b"\n", 1)[0] if name == "csv" else None
            plain, compiled = compile_parser(format_), compile_parser(format_, compiled=True)
            runs[f"{name}, {label}"] = (parse_all(plain, blocks(data), header), n)
            if name not in ("number", "pattern"):
                runs[f"{name}, {label}, compiled"] = (parse_all(compiled, blocks(data), header), n)
    best = dict.fromkeys(runs, float("inf"))
    for _ in range(ROUNDS):
        for name, (run, _) in runs.items():
            start = time.process_time()
            run()
            best[name] = min(best[name], time.process_time() - start)
    yardstick = best["bare json.loads"]
    for name, seconds in best.items():
        print(f"{name:<28} {seconds / n * 1e9:8.0f} ns a line   {yardstick / seconds:7.1f} x json.loads")


if __name__ == "__main__":
    with tempfile.TemporaryDirectory() as scratch:
        main(int(sys.argv[1]) if len(sys.argv) > 1 else 100_000, Path(scratch))
