"""Sockets to listen on: internet addresses and socket files, open for their owner only."""

from __future__ import annotations

import contextlib
import errno
import os
import socket
import stat

from monitor.errors import SourceError

BACKLOG = 128


class Listener:
    """A listening socket; takes its socket file away when it closes."""

    def __init__(self, address: str, host: str, port: int, path: str) -> None:
        """Listen on host and port, or on the socket file of a path. Raises SourceError."""
        self.address = address
        self._path: str | None = None
        self._inode: tuple[int, int] | None = None
        try:
            self.socket = self._local(path) if path else _internet(host, port)
        except OSError as error:
            if error.errno == errno.EADDRINUSE:
                raise SourceError(f"{address}: another process listens there already. Stop it.") from None
            raise SourceError(f"{address}: cannot listen there ({(error.strerror or str(error)).lower()}).") from None
        self.socket.setblocking(False)

    def accept(self) -> socket.socket | None:
        """The next waiting connection, not blocking; None when there is none."""
        try:
            connection, _ = self.socket.accept()
        except OSError:  # nobody waits, or who waited has gone
            return None
        connection.setblocking(False)
        return connection

    def close(self) -> None:
        """Stop listening."""
        self.socket.close()
        if self._path is not None and _inode(self._path) == self._inode:
            with contextlib.suppress(OSError):
                os.unlink(self._path)

    def _local(self, path: str) -> socket.socket:
        _remove_stale(self.address, path)
        listening = socket.socket(socket.AF_UNIX, socket.SOCK_STREAM)
        before = os.umask(0o177)  # the file is never open to others, not even for a moment
        try:
            listening.bind(path)
            listening.listen(BACKLOG)
        except OSError:
            listening.close()
            raise
        finally:
            os.umask(before)
        self._path, self._inode = path, _inode(path)
        return listening


def _internet(host: str, port: int) -> socket.socket:
    listening = socket.socket(socket.AF_INET6 if ":" in host else socket.AF_INET, socket.SOCK_STREAM)
    try:
        listening.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        listening.bind((host, port))
        listening.listen(BACKLOG)
    except OSError:
        listening.close()
        raise
    return listening


def _remove_stale(address: str, path: str) -> None:
    """Take away a socket file that nobody listens on; anything else at the path is left alone."""
    try:
        mode = os.lstat(path).st_mode
    except FileNotFoundError:
        return
    if not stat.S_ISSOCK(mode):
        raise SourceError(f"{address}: something else than a socket stands there; it is left alone.")
    with socket.socket(socket.AF_UNIX, socket.SOCK_STREAM) as probe:
        probe.settimeout(1.0)
        try:
            probe.connect(path)
        except ConnectionRefusedError:
            os.unlink(path)
            return
        except OSError as error:
            raise SourceError(f"{address}: cannot tell whether somebody listens there ({error}).") from None
    raise SourceError(f"{address}: another process listens there already. Stop it.")


def _inode(path: str) -> tuple[int, int] | None:
    try:
        status = os.lstat(path)
    except OSError:
        return None
    return status.st_dev, status.st_ino
