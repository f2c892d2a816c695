"""The one table that others than the daemon may write: what people ask for."""

from __future__ import annotations

import sqlite3
from contextlib import closing
from pathlib import Path

from storage.store import check_file, check_identity, named_errors


def ask(path: Path, request: str, act: str, now: int) -> None:
    """Queue a request for the daemon that writes this store.

    Parameters: request, its id; act, JSON of what is asked for; now, ns.
    Raises the errors of check_file and check_identity, or StoreBusy.
    """
    check_file(path)
    with named_errors(path), closing(sqlite3.connect(str(path), isolation_level=None, timeout=10.0)) as connection:
        check_identity(connection, path)
        connection.execute("insert into request (id, act, made_at) values (?, ?, ?)", [request, act, now])
