"""The ordinary daemon on the story's accelerated clock.

python -m demo.daemon SETTINGS REAL_START SPEED
"""

from __future__ import annotations

import sys
from pathlib import Path

from demo.warehouse import OPENING
from monitor.cli.output import load_plan
from monitor.service.clock import ScaledClock
from monitor.service.log import Log
from monitor.service.run import Asked, run_daemon


def main(arguments: list[str]) -> None:
    """Run until told to stop."""
    settings, real_start, speed = arguments
    path = Path(settings)
    clock = ScaledClock(OPENING, int(real_start), float(speed))
    run_daemon(load_plan(path), Asked(base=path.parent), clock, Log(clock))


if __name__ == "__main__":
    main(sys.argv[1:])
