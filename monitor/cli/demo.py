"""`tailgauge demo`: the scripted warehouse, live."""

from __future__ import annotations

from pathlib import Path

import click
from rich.console import Console


@click.command()
@click.option("--fast", is_flag=True, help="Tell the story in 15 seconds instead of 90.")
@click.option("--seconds", type=click.FloatRange(min=5.0), help="Tell the story in so many seconds.")
@click.option("--seed", type=click.IntRange(min=0), default=7, show_default=True, help="Of the invented orders.")
@click.option("--dir", "folder", type=click.Path(path_type=Path), help="Keep log, settings and store in this folder.")
def demo(fast: bool, seconds: float | None, seed: int, folder: Path | None) -> None:
    """Run an invented parts warehouse live: its order log, the daemon on it, and the screen."""
    # The story brings the tail engine with it: not for --help.
    from demo.story import FAST_SECONDS, FULL_SECONDS, Story, tell

    length = seconds if seconds is not None else FAST_SECONDS if fast else FULL_SECONDS
    tell(Story(length, seed, folder), Console(highlight=False))
