"""Real programs: what they are given, how they end, and that none of them can hold the caller up."""

from __future__ import annotations

import json
import os
import sys
import time
from pathlib import Path

import pytest

from monitor.deliver.child import MOST_OUTPUT, Child
from monitor.deliver.cloudevent import structured
from monitor.deliver.command import CommandRoute
from monitor.deliver.route import Receipt
from tests.deliver.ways import event, receipt


def program(folder: Path, body: str, name: str = "page") -> str:
    path = folder / name
    path.write_text(f"#!{sys.executable} -IS\nimport os, sys, time\n{body}\n")
    path.chmod(0o700)
    return f"./{name}"


def run(folder: Path, *arguments: str, timeout: float = 20.0, **data: object) -> Receipt:
    route = CommandRoute(arguments, folder=folder, timeout=timeout)
    return receipt(route.send(event(**data), time.monotonic()))


def gone(process: int) -> bool:
    for _ in range(500):
        try:
            os.kill(process, 0)
        except ProcessLookupError:
            return True
        status = Path(f"/proc/{process}/stat")
        if status.exists() and status.read_text().rpartition(")")[2].split()[0] == "Z":
            return True
        time.sleep(0.01)
    return False


def test_the_program_is_given_the_event_and_runs_in_the_folder_of_the_settings(tmp_path: Path) -> None:
    command = program(tmp_path, "open('got', 'wb').write(sys.stdin.buffer.read()); print('paged Ana')")
    assert run(tmp_path, command) == Receipt(result="delivered", detail="exit code 0: paged Ana")
    assert (tmp_path / "got").read_bytes() == structured(event())


def test_arguments_reach_the_program_as_they_are_and_no_shell_sees_them(tmp_path: Path) -> None:
    command = program(tmp_path, "import json; open('got', 'w').write(json.dumps(sys.argv[1:]))")
    odd = ["$(touch hacked)", "; touch hacked", "a b", "*", ""]
    assert run(tmp_path, command, *odd).delivered
    assert json.loads((tmp_path / "got").read_text()) == odd
    assert not (tmp_path / "hacked").exists()


@pytest.mark.parametrize(
    ("body", "words"),
    [
        ("print('no such desk', file=sys.stderr); sys.exit(3)", "exit code 3: no such desk"),
        ("os.kill(os.getpid(), 15)", "was ended by SIGTERM"),
        ("os.kill(os.getpid(), 40)", "was ended by signal 40"),
    ],
)
def test_any_other_end_is_a_failure_in_words(tmp_path: Path, body: str, words: str) -> None:
    found = run(tmp_path, program(tmp_path, body))
    assert not found.delivered
    assert found.detail.endswith(words)


def test_a_program_that_takes_too_long_is_ended_with_its_children(tmp_path: Path) -> None:
    body = """
child = os.fork()
if child:
    open('pids.new', 'w').write(f'{os.getpid()} {child}')
    os.rename('pids.new', 'pids')
time.sleep(120)
"""
    route = CommandRoute([program(tmp_path, body)], folder=tmp_path, timeout=5.0)
    started = time.monotonic()
    sending = route.send(event(), started)
    while not (tmp_path / "pids").exists() and time.monotonic() < started + 20.0:
        assert sending.poll(started) is None
        time.sleep(0.01)
    found = sending.poll(started + 5.0)  # the caller's clock decides
    assert found is not None
    assert found.detail.endswith("page: took longer than 5 s and was ended")
    assert all(gone(int(process)) for process in (tmp_path / "pids").read_text().split())


def test_a_program_that_writes_without_end_is_ended_and_its_output_bounded(tmp_path: Path) -> None:
    found = run(tmp_path, program(tmp_path, "while True: os.write(1, b'spam ' * 10000)"), timeout=1.0)
    assert "took longer than 1 s" in found.detail
    assert len(found.detail) <= 500


def test_only_the_end_of_the_output_is_kept(tmp_path: Path) -> None:
    child = Child([sys.executable, "-ISc", "print('x' * 100_000 + 'end')"], b"", deadline=time.monotonic() + 20.0)
    while (end := child.poll(time.monotonic())) is None:
        time.sleep(0.005)
    assert len(end.output) == MOST_OUTPUT
    assert end.output.endswith(b"xend\n")


def test_much_output_is_read_so_that_the_program_can_end(tmp_path: Path) -> None:
    found = run(tmp_path, program(tmp_path, "os.write(1, b'x' * 3_000_000) ; print(); print('the end')"))
    assert found.delivered
    assert found.detail.endswith("the end")


def test_a_program_need_not_read_its_input_however_long(tmp_path: Path) -> None:
    found = run(tmp_path, program(tmp_path, "pass"), filler="x" * 500_000)
    assert found.delivered


def test_a_long_event_arrives_whole_at_a_slow_reader(tmp_path: Path) -> None:
    body = "time.sleep(0.1); open('got', 'wb').write(sys.stdin.buffer.read())"
    assert run(tmp_path, program(tmp_path, body), filler="x" * 500_000).delivered
    assert (tmp_path / "got").read_bytes() == structured(event(filler="x" * 500_000))


def test_a_program_may_leave_something_running_that_holds_its_output(tmp_path: Path) -> None:
    body = "pid = os.fork()\nif pid:\n    open('pid', 'w').write(str(pid)); os._exit(0)\ntime.sleep(100)"
    assert run(tmp_path, program(tmp_path, body)).delivered
    os.kill(int((tmp_path / "pid").read_text()), 9)


def test_a_program_that_cannot_be_run_is_a_receipt_and_no_exception(tmp_path: Path) -> None:
    assert "page: cannot be run (No such file or directory)" in run(tmp_path, "./page").detail
    (tmp_path / "page").write_text("x")
    assert "page: cannot be run (Permission denied)" in run(tmp_path, "./page").detail
    assert "no-such-program-anywhere: cannot be run" in run(tmp_path, "no-such-program-anywhere").detail
    assert "cannot be run" in run(tmp_path / "absent", "true").detail


def test_stopping_leaves_no_process_behind(tmp_path: Path) -> None:
    command = program(tmp_path, "open('pid', 'w').write(str(os.getpid())); time.sleep(120)")
    route = CommandRoute([command], folder=tmp_path, timeout=60.0)
    sending = route.send(event(), time.monotonic())
    while not (tmp_path / "pid").exists() or not (tmp_path / "pid").read_text():
        time.sleep(0.01)
    sending.stop()
    assert gone(int((tmp_path / "pid").read_text()))
