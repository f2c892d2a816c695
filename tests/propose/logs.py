"""Invented logs of every format, with a known right answer."""

from __future__ import annotations

import datetime as dt
import json
import random
from collections.abc import Callable

START = dt.datetime(2026, 11, 1, tzinfo=dt.UTC)


def stamp(seconds: float, form: str = "%Y-%m-%dT%H:%M:%SZ") -> str:
    return (START + dt.timedelta(seconds=seconds)).strftime(form)


def json_lines(rng: random.Random, count: int) -> str:
    return "".join(
        json.dumps(
            {
                "id": f"A{i:06d}", "cart": {"site": {"dock": rng.choice(["north", "south"])}},
                "placed_at": stamp(30 * i),
                "units": round(10 * rng.paretovariate(1.4), 1), "port": rng.choice([80, 443, 8080, 9000, 9001, 9002]),
                "lat": round(rng.uniform(-60, 60), 6), "status": rng.choice([200, 404]),
            }
        )
        + "\n"
        for i in range(count)
    )  # fmt: skip


def csv_named(rng: random.Random, count: int) -> str:
    rows = [
        f"{i};{rng.choice(['Porto', 'Faro'])};{stamp(600 * i, '%Y-%m-%d %H:%M:%S')};"
        f"{200 * rng.paretovariate(1.2):.2f};EUR"
        for i in range(count)
    ]
    return "\n".join(["claim_id;branch;paid_at;amount;currency", *rows]) + "\n"


def csv_bare(rng: random.Random, count: int) -> str:
    return "".join(
        f"{1_793_491_200_000 + 60_000 * i}\t{rng.choice('ab')}\t{200 * rng.paretovariate(1.2):.2f}\n"
        for i in range(count)
    )


def combined(rng: random.Random, count: int) -> str:
    return "".join(
        f'10.0.0.{rng.randrange(9)} - - [{stamp(7 * i, "%d/%b/%Y:%H:%M:%S +0000")}] "GET /x/{rng.randrange(99)}'
        f' HTTP/1.1" {rng.choice([200, 404])} {int(500 * rng.paretovariate(1.2))} "-" "Browser/5.0"\n'
        for i in range(count)
    )


def pairs(rng: random.Random, count: int) -> str:
    """Jobs logged when they end, dated by their start."""
    rows = []
    for i in range(count):
        took = 5 * rng.paretovariate(1.3)
        text = f'ts={stamp(40 * i)} node=n{rng.randrange(3)} msg="job done" duration_s={took:.1f} job=j{i}\n'
        rows.append((40 * i + took, text))
    return "".join(text for _, text in sorted(rows))


def numbers(rng: random.Random, count: int) -> str:
    return "".join(f"{int(5 * rng.paretovariate(1.4))}\n" for _ in range(count))


def free_text(rng: random.Random, count: int) -> str:
    return "".join(
        f"{stamp(13 * i, '%Y-%m-%d %H:%M:%S')},{i % 1000:03d} INFO [worker-{rng.randrange(3)}] backup of "
        f"host{rng.randrange(5)} finished in {2000 * rng.paretovariate(1.2):.0f} ms, rc=0\n"
        for i in range(count)
    )


LOGS: dict[str, Callable[[random.Random, int], str]] = {
    "json": json_lines, "csv": csv_named, "csv without header": csv_bare, "combined": combined, "pairs": pairs,
    "number": numbers, "pattern": free_text,
}  # fmt: skip


def log(kind: str, count: int = 1500, seed: int = 4) -> bytes:
    return LOGS[kind](random.Random(seed), count).encode()
