"""Writes the warehouse's order log at the pace of an accelerated clock, one file a day by rename rotation.

python -m demo.writer FOLDER SEED DAYS REAL_START SPEED
"""

from __future__ import annotations

import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

from demo.warehouse import DAY, OPENING, hour_of_orders, script
from monitor.service.clock import Clock, ScaledClock

LOG = "orders.jsonl"


def lines_in_time(seed: int, days: float) -> Iterator[tuple[int, str]]:
    """All lines of the story with the moments they are written at."""
    changes = script(days)
    for hour in range(round(days * 24)):
        yield from hour_of_orders(seed, hour, changes)


def write(folder: Path, lines: Iterator[tuple[int, str]], clock: Clock, wait: Callable[[float], None]) -> int:
    """Write lines when their moment has come; rotate at each day's end. Returns how many were written."""
    count, day = 0, 0
    log = folder / LOG
    file = log.open("a", encoding="utf-8")
    try:
        for moment, line in lines:
            while clock.now() < moment:
                file.flush()
                wait(0.05)
            if (moment - OPENING) // DAY > day:
                file.close()
                log.rename(folder / f"orders.{day:03d}.jsonl")
                day = (moment - OPENING) // DAY
                file = log.open("a", encoding="utf-8")
            file.write(line + "\n")
            count += 1
    finally:
        file.close()
    return count


def main(arguments: list[str]) -> None:
    """Write the log that the arguments ask for, then leave the number of lines beside it."""
    folder, seed, days, real_start, speed = arguments
    clock = ScaledClock(OPENING, int(real_start), float(speed))
    count = write(Path(folder), lines_in_time(int(seed), float(days)), clock, time.sleep)
    (Path(folder) / "written").write_text(f"{count}\n", encoding="utf-8")


if __name__ == "__main__":
    main(sys.argv[1:])
