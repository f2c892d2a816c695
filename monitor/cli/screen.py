"""`tailgauge screen`: what the store says now, once or live."""

from __future__ import annotations

import os
import sys
import time
from pathlib import Path

import click
import msgspec
from rich.console import Console

from monitor.cli.output import in_option, json_option, print_json
from monitor.cli.watching import StoreWatch
from monitor.render.documents import screen_document
from monitor.render.focus import focus_page
from monitor.render.frame import Look, as_text
from monitor.render.screen import overview

HEIGHT_WITHOUT_TERMINAL = 50


@click.command()
@click.option("--once", is_flag=True, help="Print one frame of plain text and end.")
@click.option("--stream", metavar="S", help="Look at one stream closely.")
@json_option
@in_option
def screen(*, once: bool, stream: str | None, as_json: bool, place: Path) -> None:
    """Show what is known now; live on a terminal, one frame of plain text elsewhere."""
    console = Console(highlight=False, markup=False, emoji=False)
    with StoreWatch(place) as watch:
        if stream is not None:
            watch.focus(stream)
        if as_json:
            document = screen_document(watch.look(), time.time_ns())
            if stream is not None:
                document["streams"] = [one for one in document["streams"] if one["stream"] == stream]
            print_json(document)
        elif once or not can_redraw(console):
            click.echo(one_frame(watch, still_look(console), stream, time.time_ns()))
        else:
            # Only the live display needs the modules that handle a terminal.
            from monitor.cli.live import run_live

            run_live(watch, console, look_of(console), stream)


def can_redraw(console: Console) -> bool:
    """Whether there is a terminal at both ends that can be painted over."""
    return console.is_terminal and not console.is_dumb_terminal and sys.stdin.isatty()


def look_of(console: Console) -> Look:
    """The size of the terminal, and whether its encoding takes dots and lines."""
    try:
        "─┴⣿".encode(console.encoding)
        ascii_only = False
    except (UnicodeEncodeError, LookupError):
        ascii_only = True
    return Look(width=max(1, console.width), height=max(1, console.height), ascii_only=ascii_only)


def still_look(console: Console) -> Look:
    """The same for one frame that stays: the prompt after it takes a line, a file has room for more."""
    look = look_of(console)
    if console.is_terminal:
        return msgspec.structs.replace(look, height=max(1, look.height - 1))
    return look if "LINES" in os.environ else msgspec.structs.replace(look, height=HEIGHT_WITHOUT_TERMINAL)


def one_frame(watch: StoreWatch, look: Look, stream: str | None, now: int) -> str:
    """One frame of plain text; now in ns, on the scale of the events' time."""
    if stream is None:
        return as_text(overview(watch.look(), now, look))
    return as_text(focus_page(watch.focus(stream), watch.look(), now, look))
