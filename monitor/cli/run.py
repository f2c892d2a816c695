"""`tailgauge run`: the daemon."""

from __future__ import annotations

import sys
from pathlib import Path

import click
import msgspec
from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn

from monitor.cli.output import load_plan
from monitor.service.clock import SystemClock
from monitor.service.log import LEVELS, Log
from monitor.service.run import Asked, run_daemon


@click.command()
@click.argument("settings", type=click.Path(path_type=Path))
@click.option("--finish", is_flag=True, help="Read what is there, seal, judge and stop.")
@click.option("--log-level", type=click.Choice(LEVELS), default="info", show_default=True)
def run(settings: Path, finish: bool, log_level: str) -> None:
    """Follow the logs that SETTINGS names, refit on schedule, keep everything in the store."""
    plan = load_plan(settings)
    clock = SystemClock()
    log = Log(clock, log_level)
    asked = Asked(base=settings.parent, finish=finish, reread=lambda: load_plan(settings))
    if not (finish and sys.stderr.isatty()):
        run_daemon(plan, asked, clock, log)
        return
    with Progress(
        TextColumn("judging windows"), BarColumn(), TextColumn("{task.completed} of {task.total}"),
        console=Console(stderr=True), transient=True,
    ) as progress:  # fmt: skip
        task = progress.add_task("refits", total=None)
        most = 0

        def show(left: int) -> None:
            nonlocal most
            most = max(most, left)
            progress.update(task, total=most, completed=most - left)

        run_daemon(plan, msgspec.structs.replace(asked, on_progress=show), clock, log)
