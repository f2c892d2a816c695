"""`tailgauge check`: is the store whole; a live backup; the canonical export."""

from __future__ import annotations

import os
import sqlite3
from collections.abc import Iterable
from pathlib import Path

import click
import msgspec

from monitor.cli.output import in_option, json_option, open_place, print_json
from monitor.errors import OutputError
from monitor.render.safe import plain
from monitor.render.times import plural
from storage.audit import canonical_lines, check
from storage.history import Reader


@click.command("check")
@click.option("--backup", "backup", type=click.Path(path_type=Path), help="Copy the store to this new file, live.")
@click.option(
    "--export",
    "export",
    type=click.Path(path_type=Path, allow_dash=True),
    help="Write the canonical export to this new file, or - for standard output.",
)
@json_option
@in_option
def check_command(*, backup: Path | None, export: Path | None, as_json: bool, place: Path) -> int:
    """Check integrity, checksums, schema, positions and accounts of a store.

    Exit code 1 when anything is not as it should be.
    """
    with open_place(place) as reader:
        if export is not None:
            _write_export(canonical_lines(reader), export)
            if str(export) == "-":
                return 0
        if backup is not None:
            _write_backup(reader, backup)
        findings = check(reader)
    faults = sum(len(finding.faults) for finding in findings)
    if as_json:
        print_json({"whole": not faults, "findings": [msgspec.to_builtins(finding) for finding in findings]})
    else:
        for finding in findings:
            state = "as it should be" if not finding.faults else plural(len(finding.faults), "fault")
            click.echo(f"{finding.what}: {finding.looked_at} looked at, {state}")
            for fault in finding.faults:
                click.echo(f"  {plain(fault)}")
        for path, what in ((backup, "backup"), (export, "export")):
            if path is not None:
                click.echo(f"{what} written to {path}")
    return 1 if faults else 0


def _write_export(lines: Iterable[str], path: Path) -> None:
    if str(path) == "-":
        for line in lines:
            click.echo(line)
        return
    with os.fdopen(_new_file(path), "w", encoding="utf-8") as file:
        for line in lines:
            file.write(line + "\n")


def _write_backup(reader: Reader, path: Path) -> None:
    """SQLite's own online backup: a consistent copy while the daemon goes on writing."""
    os.close(_new_file(path))
    try:
        target = sqlite3.connect(path)
        try:
            reader.db.conn.backup(target, pages=1000)
        finally:
            target.close()
    except sqlite3.Error as error:
        path.unlink(missing_ok=True)
        raise OutputError(f"{path}: the backup failed ({error}).") from None


def _new_file(path: Path) -> int:
    try:
        return os.open(path, os.O_WRONLY | os.O_CREAT | os.O_EXCL, 0o600)
    except FileExistsError:
        raise OutputError(f"{path}: is there already; it is not overwritten. Name a new file.") from None
    except OSError as error:
        raise OutputError(f"{path}: cannot be made ({error.strerror}).") from None
