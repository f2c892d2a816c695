"""What the commands share: `--in`, finding the store, and printing one JSON document."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click
import msgspec

from monitor.errors import SourceError
from monitor.plan import Plan, read_plan
from storage.history import Reader, open_reader

DEFAULT_SETTINGS = "tailgauge.toml"

in_option = click.option(
    "--in", "place", type=click.Path(path_type=Path), default=DEFAULT_SETTINGS, show_default=True,
    help="A settings file or a store file.",
)  # fmt: skip
json_option = click.option("--json", "as_json", is_flag=True, help="Print one JSON document instead of words.")


def read_text(path: Path) -> str:
    """The text of a file that a user named. Raises SourceError naming it."""
    try:
        return path.read_text(encoding="utf-8")
    except UnicodeDecodeError:
        raise SourceError(f"{path}: not a text file in UTF-8.") from None
    except OSError as error:
        raise SourceError(f"{path}: cannot be read ({error.strerror}).") from None


def load_plan(path: Path) -> Plan:
    """The plan of a settings file. Raises SourceError or SettingsError."""
    return read_plan(read_text(path), str(path))


def store_path(place: Path, plan: Plan) -> Path:
    """Where the store of a settings file lies: relative to the file, not to where the command is called."""
    return place.parent / plan.store


def open_place(place: Path) -> Reader:
    """Open the store that `--in` names, whether it is a settings file or the store itself."""
    try:
        with place.open("rb") as file:
            is_store = file.read(16) == b"SQLite format 3\0"
    except FileNotFoundError:
        raise SourceError(f"{place}: no such file. Name a settings file or a store with --in.") from None
    except OSError as error:
        raise SourceError(f"{place}: cannot be read ({error.strerror}).") from None
    return open_reader(place if is_store else store_path(place, load_plan(place)))


def plan_of(reader: Reader) -> Plan:
    """The plan in force in a store: what its settings said last."""
    text = reader.settings_text()
    if text is None:
        raise SourceError(f"{reader.path}: the store holds no settings yet. Start `tailgauge run SETTINGS` first.")
    return read_plan(text, f"settings in {reader.path}")


def print_json(document: Any) -> None:
    """One JSON document on standard output; NaN cannot occur, since records hold none."""
    click.echo(msgspec.json.format(msgspec.json.encode(document), indent=2).decode())
