"""One niced process that judges windows, so that intake never waits for a fit.

It is given a request, reads the window's sealed panes from the store by itself, and sends an outcome back.
Requests and outcomes travel as JSON. A worker that dies or hangs is an outcome too, and is replaced.
"""

from __future__ import annotations

import contextlib
import multiprocessing
import os
import platform
import signal
import time
from multiprocessing.connection import Connection
from multiprocessing.process import BaseProcess
from pathlib import Path

import msgspec
import numba
import numpy as np
import scipy

from monitor import VERSION
from monitor.engine.refits import RefitRequest, judge_window
from monitor.engine.stimuli import Outcome
from monitor.parse import warm_parsers
from storage.errors import StoreError
from storage.history import open_reader
from storage.window import digest_of_panes

NICENESS = 10
READY = b"ready"


class Worker:
    """The parent's side. One request at a time.

    Parameters: store, the file to read from; patience, real seconds after which a request counts as hung.
    """

    def __init__(self, store: Path, patience: float = 900.0) -> None:
        self._store = store
        self._patience = patience
        self._request: RefitRequest | None = None
        self._since = 0.0
        self.ready = False
        self._process, self._connection = self._start()

    def _start(self) -> tuple[BaseProcess, Connection]:
        context = multiprocessing.get_context("spawn")
        ours, theirs = context.Pipe()
        process = context.Process(target=serve, args=(theirs, str(self._store)), daemon=True, name="tailgauge-refits")
        process.start()
        theirs.close()
        return process, ours

    @property
    def busy(self) -> bool:
        """A request is out."""
        return self._request is not None

    def submit(self, request: RefitRequest) -> None:
        """Hand a request over; its outcome comes from `poll`."""
        assert self._request is None, "one request at a time"
        self._request = request
        self._since = time.monotonic()
        # A dead worker is noticed by poll.
        with contextlib.suppress(BrokenPipeError, ConnectionResetError):
            self._connection.send_bytes(msgspec.json.encode(request))

    def poll(self) -> Outcome | None:
        """An outcome, if there is one; never waits."""
        try:
            while self._connection.poll(0):
                message = self._connection.recv_bytes()
                if message == READY:
                    self.ready = True
                    continue
                self._request = None
                return msgspec.json.decode(message, type=Outcome)
        except (EOFError, ConnectionResetError):
            return self._replace(f"the worker process ended unexpectedly (exit code {self._exit_code()})")
        if self._request is not None and time.monotonic() - self._since > self._patience:
            return self._replace(f"the judgement took longer than {self._patience:g} s and was ended")
        return None

    def _exit_code(self) -> int | None:
        self._process.join(1.0)
        return self._process.exitcode

    def _replace(self, failure: str) -> Outcome | None:
        request = self._request
        self.restart()
        if request is None:
            return None
        return Outcome(job=request.job, seed=request.options.seed, failure=failure)

    def restart(self) -> None:
        """A new process; a request that was out is given up."""
        self.stop()
        self._request = None
        self.ready = False
        self._process, self._connection = self._start()

    def stop(self) -> None:
        """End the process at once; what it was judging stays queued in the store."""
        self._connection.close()
        self._process.kill()
        self._process.join(5.0)


def serve(connection: Connection, store: str) -> None:
    """The worker's side: compile, say ready, then answer requests until the parent goes away."""
    signal.signal(signal.SIGINT, signal.SIG_IGN)  # Ctrl-C reaches the whole group; the parent decides
    os.nice(NICENESS)
    from monitor.tail.judge import compile_everything

    warm_parsers()  # for the parent, which loads them from the cache once this process is ready
    compile_everything()
    with contextlib.suppress(EOFError, BrokenPipeError, ConnectionResetError):
        connection.send_bytes(READY)
        while True:
            request = msgspec.json.decode(connection.recv_bytes(), type=RefitRequest)
            connection.send_bytes(msgspec.json.encode(answer(request, Path(store))))


def answer(request: RefitRequest, store: Path) -> Outcome:
    """Judge one window of a store. What goes wrong with the store is told in the outcome."""
    started = time.perf_counter()
    job = request.job
    try:
        with open_reader(store) as reader:
            panes = reader.pane_contents(job.stream, job.start, job.end)
    except StoreError as error:
        return Outcome(job=job, seed=request.options.seed, failure=str(error))
    verdict = judge_window(request, panes)
    return Outcome(
        job=job,
        seed=request.options.seed,
        panes=len(panes),
        window_digest=digest_of_panes(pane.digest for pane in panes),
        judgement=msgspec.json.encode(verdict.judgement).decode(),
        comparison=msgspec.json.encode(verdict.comparison).decode() if verdict.comparison else None,
        watched=verdict.watched,
        measured=verdict.measured,
        seconds=time.perf_counter() - started,
        versions=versions(),
    )


def versions() -> str:
    """What a result came from, as JSON."""
    found = {
        "tailgauge": VERSION, "python": platform.python_version(), "numpy": np.__version__,
        "scipy": scipy.__version__, "numba": numba.__version__, "machine": platform.machine(),
    }  # fmt: skip
    return msgspec.json.encode(found).decode()
