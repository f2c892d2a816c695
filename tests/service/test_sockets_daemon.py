"""Lines sent to the real daemon: exactly once over HTTP through kill -9 and retries; at most once over a socket."""

from __future__ import annotations

import http.client
import random
import socket
import time
from pathlib import Path

import pytest

from storage.history import open_reader
from storage.store import open_store
from tests.service.daemon import Daemon, command, export, lines_read, wait_for
from tests.service.test_run import SETTINGS, fresh, order_lines
from tests.sources.wire import free_port


def listening(folder: Path, address: str) -> Path:
    fresh(folder, SETTINGS.replace('follow = ["orders.jsonl"]', f'listen = "{address}"'))
    return folder / "orders.db"


def post(port: int, key: str, body: bytes, *, seconds: float = 10.0) -> int | None:
    """Send one batch; the status, None when no answer came."""
    client = http.client.HTTPConnection("127.0.0.1", port, timeout=seconds)
    try:
        client.request("POST", "/lines", body, {"Idempotency-Key": key})
        return client.getresponse().status
    except (OSError, http.client.HTTPException):
        return None
    finally:
        client.close()


def must_post(port: int, key: str, body: bytes) -> None:
    until = time.monotonic() + 60
    while post(port, key, body) != 200:
        assert time.monotonic() < until, "the daemon does not answer"
        time.sleep(0.05)


def batches_of(lines: list[str]) -> list[bytes]:
    return [("\n".join(lines[i : i + 30]) + "\n").encode() for i in range(0, len(lines), 30)]


def send_disturbed(folder: Path, port: int, batches: list[bytes], rng: random.Random) -> None:
    """Send all batches; now and then the daemon is killed while one is under way."""
    sent = 0
    while sent < len(batches):
        with Daemon(folder) as daemon:
            last = min(sent + rng.randrange(15, 40), len(batches))
            for i in range(sent, last):
                must_post(port, f"batch-{i}", batches[i])
            sent = last
            if sent < len(batches):
                # One more whose answer is not waited for: the kill falls before, in or after its commit.
                post(port, f"batch-{sent}", batches[sent], seconds=rng.uniform(0.001, 0.15))
                daemon.kill()
            else:
                assert post(port, "batch-0", batches[0]) == 200  # known through all those restarts
                assert post(port, "batch-0", b"other\n") == 422
                assert daemon.stop() == 0


@pytest.mark.slow
def test_batches_are_counted_once_through_kills_and_retries(tmp_path: Path) -> None:
    """The store equals that of a quiet run to the last bit, and its panes those of a followed file."""
    lines, port = order_lines(3000), free_port()
    batches = batches_of(lines)
    disturbed, quiet = tmp_path / "disturbed", tmp_path / "quiet"
    stores = [listening(folder, f"http://127.0.0.1:{port}") for folder in (disturbed, quiet)]
    send_disturbed(disturbed, port, batches, random.Random(5))
    with Daemon(quiet) as daemon:
        for i, batch in enumerate(batches):
            must_post(port, f"batch-{i}", batch)
        assert daemon.stop() == 0
    for folder in (disturbed, quiet):
        assert command("run", "t.toml", "--finish", folder=folder).returncode == 0
    assert lines_read(stores[0]) == 3000
    assert export(stores[0]) == export(stores[1])

    followed = tmp_path / "followed"
    fresh(followed).write_text("\n".join(lines) + "\n")
    assert command("run", "t.toml", "--finish", folder=followed).returncode == 0
    assert len(panes(stores[0])) > 20
    assert panes(stores[0]) == panes(followed / "orders.db")


def panes(store: Path) -> list[str]:
    return [line for line in export(store) if line.startswith('{"pane"')]


def test_without_the_id_a_batch_is_refused(tmp_path: Path) -> None:
    port = free_port()
    listening(tmp_path, f"http://127.0.0.1:{port}")
    with Daemon(tmp_path) as daemon:
        must_post(port, "a", b'{"units": 1, "placed_at": "2026-03-02T00:00:00Z", "dock": "n"}\n')
        client = http.client.HTTPConnection("127.0.0.1", port, timeout=10)
        client.request("POST", "/lines", b"1\n")
        answer = client.getresponse()
        assert (answer.status, b"Idempotency-Key" in answer.read()) == (400, True)
        client.close()
        assert daemon.stop() == 0
    assert lines_read(tmp_path / "orders.db") == 1


@pytest.mark.parametrize("kind", ["tcp", "unix"])
def test_lines_over_a_socket_are_counted(tmp_path: Path, kind: str) -> None:
    port = free_port()
    store = listening(tmp_path, f"tcp://127.0.0.1:{port}" if kind == "tcp" else "unix://lines.sock")
    text = ("\n".join(order_lines(500)) + "\n").encode()

    def connect() -> socket.socket:
        until = time.monotonic() + 60
        while True:
            sender = socket.socket(socket.AF_INET if kind == "tcp" else socket.AF_UNIX)
            try:
                sender.connect(("127.0.0.1", port) if kind == "tcp" else str(tmp_path / "lines.sock"))
                return sender
            except OSError:
                sender.close()
                assert time.monotonic() < until
                time.sleep(0.05)

    with Daemon(tmp_path) as daemon:
        with connect() as sender:
            sender.sendall(text)
        wait_for(lambda: lines_read(store) == 500)
        assert daemon.stop() == 0
    with open_reader(store) as reader:
        (chain,) = reader.chains()
        assert chain.lines == chain.events + sum(chain.rejected.values()) + sum(chain.skipped.values())
    assert not (tmp_path / "lines.sock").exists()


def test_an_address_in_use_ends_the_daemon_with_a_sentence(tmp_path: Path) -> None:
    with socket.socket() as other:
        other.bind(("127.0.0.1", 0))
        other.listen()
        listening(tmp_path, f"http://127.0.0.1:{other.getsockname()[1]}")
        done = command("run", "t.toml", folder=tmp_path)
    assert done.returncode == 66
    assert "another process listens there already" in done.stderr
    assert "Traceback" not in done.stderr


def test_what_is_acknowledged_has_reached_the_disk(tmp_path: Path) -> None:
    """PRAGMA synchronous = 2 (FULL): SQLite documents that a commit then survives a power cut."""
    with open_store(tmp_path / "a.db", store_id="s", now=0, distinct=4096) as store:
        assert store.db.execute("pragma synchronous").fetchone()[0] == 1
        store.make_durable()
        assert store.db.execute("pragma synchronous").fetchone()[0] == 2
