"""Addresses that a feed listens on: http://127.0.0.1:7070, tcp://127.0.0.1:7071, unix:///run/lines.sock."""

from __future__ import annotations

import ipaddress
import re
from typing import Literal, cast

import msgspec

from monitor.errors import SettingsError

_INTERNET = re.compile(r"(http|tcp)://(?:\[([0-9A-Fa-f:.]+)\]|([^:/\[\]]+)):([0-9]{1,5})/?")
_LOCAL = re.compile(r"unix://(.+)", re.DOTALL)
_LONGEST_PATH = 100  # of a socket file; systems refuse more than some 104 bytes
_EXPECTED = 'expected such as "http://127.0.0.1:7070", "tcp://127.0.0.1:7071" or "unix:///run/orders.sock"'


class Listen(msgspec.Struct, frozen=True, kw_only=True):
    """Where to listen.

    address  as the settings say it
    scheme   "http" takes batches of lines and acknowledges them; "tcp" and "unix" take bare lines, at most once
    host     a numeric address, "" for a socket file; port, 0 for a socket file
    path     of the socket file, relative to the settings file; "" for the others
    """

    address: str
    scheme: Literal["http", "tcp", "unix"]
    host: str = ""
    port: int = 0
    path: str = ""


def read_listen(name: str, path: str, text: str, *, beyond_loopback: bool) -> Listen:
    """Read an address. Raises SettingsError, also for one that other machines can reach unless that is allowed."""
    if local := _LOCAL.fullmatch(text):
        file = local[1]
        if "\0" in file or len(file.encode()) > _LONGEST_PATH:
            raise SettingsError(f"{name}: {path}: a socket file needs a path of at most {_LONGEST_PATH} bytes.")
        return Listen(address=text, scheme="unix", path=file)
    match = _INTERNET.fullmatch(text)
    if match is None or not 1 <= int(match[4]) <= 65_535:
        raise SettingsError(f"{name}: {path}: {text!r} is no address to listen on; {_EXPECTED}.")
    host = match[2] or match[3]
    if host == "localhost":
        host = "127.0.0.1"
    try:
        numeric = ipaddress.ip_address(host)
    except ValueError:
        raise SettingsError(f"{name}: {path}: {host!r} is no numeric address; {_EXPECTED}.") from None
    if not numeric.is_loopback and not beyond_loopback:
        raise SettingsError(
            f"{name}: {path}: {host} can be reached from other machines, and nothing here asks who sends. Listen on "
            "127.0.0.1, or set listen_beyond_loopback = true and guard the port by other means."
        )
    scheme = cast(Literal["http", "tcp"], match[1])
    return Listen(address=text, scheme=scheme, host=host, port=int(match[4]))
