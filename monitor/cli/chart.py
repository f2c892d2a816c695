"""Where `--chart` puts its picture: refused early where it would harm; a failure leaves nothing half written."""

from __future__ import annotations

import os
from contextlib import suppress
from pathlib import Path

from monitor.errors import OutputError, UsageError
from monitor.render.safe import plain


def check_chart_place(path: Path, inputs: tuple[str, ...]) -> None:
    """Refuse a place that cannot take the picture, before any work is done for it.

    An SVG that is there will be replaced; any other file is not, since a forgotten name (`--chart orders.csv`) must not
    cost the data. Raises UsageError for `-` and OutputError.
    """
    if str(path) == "-":
        raise UsageError("--chart: the picture goes into a file, not to standard output. Name one, such as tail.svg.")
    shown = plain(str(path))
    if path.is_dir():
        raise OutputError(f"{shown}: is a folder. Name a file in it, such as tail.svg.")
    if not path.parent.is_dir():
        raise OutputError(f"{shown}: the folder {plain(str(path.parent))} does not exist.")
    if path.is_file() and (str(path) in inputs or not _is_svg(path)):
        raise OutputError(f"{shown}: is there already and is no SVG; it is not overwritten. Name another file.")


def _is_svg(path: Path) -> bool:
    try:
        with path.open("rb") as file:
            start = file.read(4096).lstrip(b"\xef\xbb\xbf \t\r\n")
    except OSError as error:
        raise OutputError(f"{plain(str(path))}: cannot be replaced ({error.strerror}).") from None
    return not start or (start.startswith(b"<") and b"<svg" in start)


def write_chart(path: Path, text: str) -> None:
    """Write the picture; a file that is there stays whole until the new one is. Raises OutputError."""
    beside = path.with_name(f".{path.name}.{os.getpid()}")
    in_place = path.exists() and not path.is_file()  # a pipe or a device is written to, not replaced
    try:
        if in_place:
            path.write_text(text, encoding="utf-8")
            return
        beside.write_text(text, encoding="utf-8")
        beside.replace(path)
    except OSError as error:
        raise OutputError(f"{plain(str(path))}: the picture cannot be written ({error.strerror}).") from None
    finally:
        with suppress(OSError):
            beside.unlink()
