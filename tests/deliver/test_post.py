"""HTTP POST to a real server on the loopback: both modes, refusals, secrets, time-outs, TLS."""

from __future__ import annotations

import json
import shutil
import ssl
import subprocess
import threading
import time
from collections.abc import Iterator
from http.server import BaseHTTPRequestHandler, ThreadingHTTPServer
from pathlib import Path

import pytest

from monitor.deliver.cloudevent import from_structured
from monitor.deliver.post import PostRoute
from monitor.deliver.route import Receipt
from monitor.plan.receivers import PostWay
from tests.deliver.ways import event, receipt


class Desk(ThreadingHTTPServer):
    """A receiver that remembers requests and answers as its path asks for."""

    daemon_threads = True

    def __init__(self) -> None:
        self.got: list[tuple[str, dict[str, str], bytes]] = []
        self.release = threading.Event()
        super().__init__(("127.0.0.1", 0), Answers)

    def handle_error(self, request: object, client_address: object) -> None:
        """Broken handshakes are meant here."""


class Answers(BaseHTTPRequestHandler):
    server: Desk

    def log_message(self, *_: object) -> None:
        pass

    def do_POST(self) -> None:
        body = self.rfile.read(int(self.headers["Content-Length"]))
        self.server.got.append((self.path, dict(self.headers.items()), body))
        status, said, place = 204, b"", None
        if self.path == "/moved":
            status, place = 302, "/elsewhere"
        elif self.path == "/broken":
            status, said = 500, b"disk\nfull " * 1000
        elif self.path == "/echo":
            status, said = 403, f"not you: {self.headers.get('Authorization')}".encode()
        elif self.path == "/hangs":
            self.server.release.wait(30)
        elif self.path == "/nonsense":
            self.wfile.write(b"what?\r\n\r\n")
            self.close_connection = True
            return
        self.send_response(status)
        if place is not None:
            self.send_header("Location", place)
        self.send_header("Content-Length", str(len(said)))
        self.end_headers()
        self.wfile.write(said)


@pytest.fixture
def desk() -> Iterator[Desk]:
    with Desk() as server:
        thread = threading.Thread(target=server.serve_forever, kwargs={"poll_interval": 0.01})
        thread.start()
        yield server
        server.release.set()
        server.shutdown()
        thread.join()


def send(address: str, folder: Path, *, timeout: float = 10.0, **way: object) -> Receipt:
    fields = {"mode": "structured", "secret_header": "Authorization", "secret_file": None, "certificates": None, **way}
    route = PostRoute(PostWay(address=address, **fields), folder=folder, timeout=timeout)  # type: ignore[arg-type]
    return receipt(route.send(event(), time.monotonic()))


def at(desk: Desk, path: str) -> str:
    return f"http://127.0.0.1:{desk.server_address[1]}{path}"


def test_structured_mode(desk: Desk, tmp_path: Path) -> None:
    assert send(at(desk, "/alarms?to=ops"), tmp_path) == Receipt(result="delivered", detail="HTTP 204 No Content")
    path, headers, body = desk.got[0]
    assert path == "/alarms?to=ops"
    assert headers["Content-Type"] == "application/cloudevents+json; charset=UTF-8"
    assert from_structured(body) == event()


def test_binary_mode(desk: Desk, tmp_path: Path) -> None:
    assert send(at(desk, "/"), tmp_path, mode="binary").delivered
    _, headers, body = desk.got[0]
    assert headers["Content-Type"] == "application/json"
    assert (headers["ce-id"], headers["ce-type"]) == (event().id, "tailgauge.alarm.raised")
    assert json.loads(body) == event().data


def test_redirects_are_refused(desk: Desk, tmp_path: Path) -> None:
    found = send(at(desk, "/moved"), tmp_path)
    assert found.detail.endswith(
        "/moved: HTTP 302 Found: redirected to /elsewhere; redirects are not followed, so give the final address"
    )
    assert [path for path, _, _ in desk.got] == ["/moved"]


def test_a_refusal_is_told_with_the_beginning_of_its_words(desk: Desk, tmp_path: Path) -> None:
    found = send(at(desk, "/broken"), tmp_path)
    assert not found.delivered
    assert "HTTP 500 Internal Server Error: disk full disk full" in found.detail
    assert len(found.detail) <= 500


def test_the_secret_is_read_anew_for_each_notice(desk: Desk, tmp_path: Path) -> None:
    secret = tmp_path / "desk.secret"
    for value in ("Bearer one", "Bearer two"):
        secret.write_text(f"{value}\n")
        secret.chmod(0o600)
        assert send(at(desk, "/"), tmp_path, secret_file="desk.secret").delivered
    assert [headers["Authorization"] for _, headers, _ in desk.got] == ["Bearer one", "Bearer two"]
    assert send(at(desk, "/"), tmp_path, secret_file="desk.secret", secret_header="X-Desk").delivered
    assert desk.got[-1][1]["X-Desk"] == "Bearer two"


def test_the_secret_is_never_told(desk: Desk, tmp_path: Path) -> None:
    secret = tmp_path / "s"
    secret.write_text("Bearer hush")
    secret.chmod(0o600)
    found = send(at(desk, "/echo"), tmp_path, secret_file="s")
    assert found.detail.endswith("HTTP 403 Forbidden: not you: (secret)")
    address = at(desk, "/broken?token=hush")
    assert "hush" not in send(address, tmp_path).detail


@pytest.mark.parametrize(
    ("text", "mode", "words"),
    [
        (None, 0o600, "s: the secret cannot be read (No such file or directory)"),
        ("Bearer hush", 0o644, "s: everybody can read or change the secret; do: chmod 600 "),
        ("", 0o600, "s: expected one line of plain characters"),
        ("hush\r\nX-Other: 1", 0o600, "s: expected one line of plain characters"),
        ("h\u00fcsh", 0o600, "s: expected one line of plain characters"),
    ],
)
def test_a_secret_that_cannot_be_used_is_told_without_it_and_nothing_is_sent(
    desk: Desk, tmp_path: Path, text: str | None, mode: int, words: str
) -> None:
    if text is not None:
        (tmp_path / "s").write_bytes(text.encode())
        (tmp_path / "s").chmod(mode)
    found = send(at(desk, "/"), tmp_path, secret_file="s")
    assert words in found.detail
    assert "hush" not in found.detail
    assert desk.got == []


def test_a_receiver_that_hangs_is_left_after_the_time_out(desk: Desk, tmp_path: Path) -> None:
    assert send(at(desk, "/hangs"), tmp_path, timeout=0.5).detail.endswith("/hangs: no answer within 0.5 s")


def test_a_poll_never_waits_for_a_receiver_that_hangs(desk: Desk, tmp_path: Path) -> None:
    way = PostWay(address=at(desk, "/hangs"), mode="structured", secret_header="A", secret_file=None, certificates=None)
    sending = PostRoute(way, folder=tmp_path, timeout=20.0).send(event(), 0.0)
    while not desk.got:
        assert sending.poll(0.0) is None
        time.sleep(0.01)
    assert sending.poll(21.9) is None
    found = sending.poll(22.0)
    assert found is not None
    assert found.detail.endswith("not done within 20 s")


def test_what_else_can_go_wrong_is_told_in_words(desk: Desk, tmp_path: Path) -> None:
    assert "/nonsense: what came back is no HTTP" in send(at(desk, "/nonsense"), tmp_path).detail
    port = desk.server_address[1]
    assert "https://127.0.0.1" in send(f"https://127.0.0.1:{port}/", tmp_path).detail
    assert "name cannot be looked up" in send("http://nowhere.invalid/", tmp_path).detail  # RFC 2606: never exists


def test_nobody_listening_is_told(tmp_path: Path) -> None:
    with Desk() as closed:
        address = at(closed, "/")
    assert send(address, tmp_path).detail.endswith(": Connection refused")


@pytest.fixture(scope="module")
def certificate(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A certificate for 127.0.0.1 that no system trusts, with its key in the same file."""
    maker = shutil.which("openssl")
    if maker is None:
        pytest.skip("needs the openssl program to make a certificate")
    path = tmp_path_factory.mktemp("tls") / "desk.pem"
    subprocess.run(
        [maker, "req", "-x509", "-newkey", "ec", "-pkeyopt", "ec_paramgen_curve:P-256", "-nodes", "-days", "2",
         "-subj", "/CN=desk", "-addext", "subjectAltName=IP:127.0.0.1", "-keyout", str(path) + ".key",
         "-out", str(path)],
        check=True, capture_output=True,
    )  # fmt: skip
    return path


@pytest.fixture
def secure_desk(desk: Desk, certificate: Path) -> Desk:
    context = ssl.SSLContext(ssl.PROTOCOL_TLS_SERVER)
    context.load_cert_chain(certificate, str(certificate) + ".key")
    desk.socket = context.wrap_socket(desk.socket, server_side=True)
    return desk


def test_a_certificate_must_be_trusted(secure_desk: Desk, certificate: Path, tmp_path: Path) -> None:
    address = f"https://127.0.0.1:{secure_desk.server_address[1]}/"
    assert "the certificate is not trusted (self-signed certificate)" in send(address, tmp_path).detail
    assert secure_desk.got == []
    assert send(address, tmp_path, certificates=str(certificate)).delivered
    assert len(secure_desk.got) == 1


def test_a_certificate_must_be_the_host_s_own(secure_desk: Desk, certificate: Path, tmp_path: Path) -> None:
    address = f"https://localhost:{secure_desk.server_address[1]}/"
    found = send(address, tmp_path, certificates=str(certificate))
    assert "the certificate is not trusted (Hostname mismatch" in found.detail
    assert secure_desk.got == []


def test_a_file_of_certificates_that_is_none_is_told(secure_desk: Desk, tmp_path: Path) -> None:
    address = f"https://127.0.0.1:{secure_desk.server_address[1]}/"
    assert "absent: there is no such file of certificates" in send(address, tmp_path, certificates="absent").detail
    (tmp_path / "empty").write_text("x")
    assert "empty: holds no certificate" in send(address, tmp_path, certificates="empty").detail
