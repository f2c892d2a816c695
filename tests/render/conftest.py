"""The warehouse's store, read once for all tests of frames."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from monitor.cli.watching import StoreWatch
from tests.stores import warehouse


@pytest.fixture(scope="module")
def watch(tmp_path_factory: pytest.TempPathFactory) -> Iterator[StoreWatch]:
    path: Path = tmp_path_factory.mktemp("store") / "orders.db"
    with StoreWatch(warehouse(path)) as found:
        yield found
