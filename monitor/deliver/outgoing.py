"""The child's side of network sends: reads one task as JSON from standard input, sends, answers with one line of JSON.

Run by its path in an isolated interpreter, so that it starts fast and imports nothing but the standard library. The
secret of a header is read here, for each notice anew, and is never part of what is answered.
"""

from __future__ import annotations

import base64
import contextlib
import errno
import http.client
import json
import re
import socket
import ssl
import stat
import sys
from pathlib import Path
from typing import Any
from urllib.parse import urlsplit

MOST_ANSWER = 300
"""Bytes of an HTTP answer's body that are told."""
CLOSING_SECONDS = 1.0
"""How long a TCP receiver has to close or to reset its end: syslog over TCP knows no answer (RFC 6587)."""
REFUSAL_SECONDS = 0.1
"""How long a refusal of a datagram may take to come back."""


class SendError(Exception):
    """Why it could not be sent, in words."""


def post(task: dict[str, Any]) -> str:
    """POST a body. Returns what came back; raises SendError, OSError or HTTPException."""
    address = urlsplit(task["address"])
    headers = dict(task["headers"])
    secret = None
    if task["secret_file"] is not None:
        secret = read_secret(Path(task["secret_file"]))
        headers[task["secret_header"]] = secret
    connection = _connection(address.scheme, address.hostname or "", address.port, task)
    target = (address.path or "/") + (f"?{address.query}" if address.query else "")
    with contextlib.closing(connection):
        connection.request("POST", target, body=base64.b64decode(task["body"]), headers=headers)
        response = connection.getresponse()
        said = response.read(MOST_ANSWER).decode("utf-8", "replace").strip()
        status = f"HTTP {response.status} {response.reason}".strip()
        if 200 <= response.status < 300:
            return status
        if 300 <= response.status < 400:
            place = response.headers.get("Location", "elsewhere")
            words = f"{status}: redirected to {place}; redirects are not followed, so give the final address"
        else:
            words = f"{status}{': ' if said else ''}{said}"
        raise SendError(words if secret is None else words.replace(secret, "(secret)"))


def _connection(scheme: str, host: str, port: int | None, task: dict[str, Any]) -> http.client.HTTPConnection:
    if scheme == "http":
        return http.client.HTTPConnection(host, port, timeout=task["timeout"])
    try:
        context = ssl.create_default_context(cafile=task["certificates"])
    except FileNotFoundError:
        raise SendError(f"{task['certificates']}: there is no such file of certificates") from None
    except ssl.SSLError as error:
        raise SendError(f"{task['certificates']}: holds no certificate that can be read ({error.reason})") from None
    return http.client.HTTPSConnection(host, port, timeout=task["timeout"], context=context)


def read_secret(path: Path) -> str:
    """The first line of the secret file. Raises SendError, whose words never hold any of it."""
    try:
        mode = path.stat().st_mode
        text = path.read_text(encoding="utf-8")
    except (OSError, UnicodeDecodeError) as error:
        reason = error.strerror if isinstance(error, OSError) else "not UTF-8"
        raise SendError(f"{path}: the secret cannot be read ({reason})") from None
    if mode & (stat.S_IROTH | stat.S_IWOTH):
        raise SendError(f"{path}: everybody can read or change the secret; do: chmod 600 {path}")
    secret = text.strip()
    if not re.fullmatch(r"[!-~]([ -~]*[!-~])?", secret):
        raise SendError(f"{path}: expected one line of plain characters, the value of the secret header")
    return secret


def syslog(task: dict[str, Any]) -> str:
    """Send one syslog message. Raises SendError or OSError."""
    message, timeout = base64.b64decode(task["message"]), task["timeout"]
    if task["transport"] == "unix":
        return _local(task["host"], message, timeout)
    if task["transport"] == "tcp":
        with socket.create_connection((task["host"], task["port"]), timeout=timeout) as stream:
            return _stream(stream, message)
    kind, _, _, _, place = socket.getaddrinfo(task["host"], task["port"], type=socket.SOCK_DGRAM)[0]
    with socket.socket(kind, socket.SOCK_DGRAM) as datagram:
        datagram.connect(place)
        return _datagram(datagram, message)


def _stream(stream: socket.socket, message: bytes) -> str:
    """Octet counting (RFC 6587 section 3.4.1): the length in digits, a space, the message."""
    stream.sendall(b"%d %b" % (len(message), message))
    stream.shutdown(socket.SHUT_WR)
    stream.settimeout(CLOSING_SECONDS)
    with contextlib.suppress(TimeoutError):
        while stream.recv(4096):
            pass
    return "sent; syslog over TCP gives no answer"


def _datagram(datagram: socket.socket, message: bytes) -> str:
    datagram.send(message)
    datagram.settimeout(REFUSAL_SECONDS)
    with contextlib.suppress(TimeoutError):
        datagram.recv(1)
    return "sent; datagrams give no answer"


def _local(path: str, message: bytes, timeout: float) -> str:
    """A local socket, of datagrams (the usual) or a stream."""
    with socket.socket(socket.AF_UNIX, socket.SOCK_DGRAM) as datagram:
        datagram.settimeout(timeout)
        try:
            datagram.connect(path)
        except OSError as error:
            if error.errno != errno.EPROTOTYPE:
                raise
        else:
            datagram.send(message)
            return "sent to the local socket"
    with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as stream:
        stream.settimeout(timeout)
        stream.connect(path)
        return _stream(stream, message)


def answer(task: dict[str, Any]) -> dict[str, Any]:
    """Do the task; what went wrong is told in words."""
    try:
        return {"delivered": True, "detail": {"post": post, "syslog": syslog}[task["kind"]](task)}
    except SendError as error:
        words = str(error)
    except ssl.SSLCertVerificationError as error:
        words = f"the certificate is not trusted ({error.verify_message})"
    except TimeoutError:
        words = f"no answer within {task['timeout']:g} s"
    except socket.gaierror as error:
        words = f"the name cannot be looked up ({error.strerror})"
    except OSError as error:
        words = error.strerror or str(error)
    except http.client.HTTPException as error:
        words = f"what came back is no HTTP ({type(error).__name__})"
    return {"delivered": False, "detail": words}


if __name__ == "__main__":
    sys.stdout.write(json.dumps(answer(json.load(sys.stdin.buffer))) + "\n")
