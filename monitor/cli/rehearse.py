"""`tailgauge rehearse`: past logs through the settings, in a scratch store: which alarms, when, how often by chance."""

from __future__ import annotations

import sys
import tempfile
from pathlib import Path

import click
import msgspec
from rich.console import Console
from rich.progress import BarColumn, Progress, TextColumn

from monitor.alarms.alarm import Alarm
from monitor.cli.alarms import alarm_lines
from monitor.cli.output import json_option, load_plan, print_json
from monitor.engine.refits import watch_order
from monitor.engine.rehearsal import Trial, ground_of, trials
from monitor.engine.restore import restore
from monitor.errors import SourceError, UsageError
from monitor.plan import Plan
from monitor.render.alarm_documents import alarm_document
from monitor.render.safe import plain
from monitor.render.times import moment_text
from monitor.service.clock import SystemClock
from monitor.service.log import Log
from monitor.service.run import Asked, remembered, run_daemon
from monitor.watch.dependence import Ground
from monitor.watch.rules import Watch
from storage.history import Reader, open_reader


class Rehearsed(msgspec.Struct, frozen=True, kw_only=True):
    """One stream's past: the watch, the ground of its promise, and what other budgets would have said."""

    stream: str
    budget_days: float
    ground: Ground
    trials: list[Trial]


@click.command()
@click.argument("settings", type=click.Path(path_type=Path))
@click.argument("files", nargs=-1, required=True, type=click.Path(path_type=Path))
@json_option
def rehearse(*, settings: Path, files: tuple[Path, ...], as_json: bool) -> None:
    """Run past logs (FILES, in place of what SETTINGS follow) through the settings, in a scratch store.

    Tells the alarms that would have come, and for shorter and longer budgets which rules would have spoken, beside the
    number of alarms that chance alone may bring.
    """
    plan = _on_files(load_plan(settings), files)
    with tempfile.TemporaryDirectory(prefix="tailgauge-rehearsal-") as folder:
        _run(plan, Path(folder))
        with open_reader(Path(folder) / plan.store) as reader:
            alarms = [msgspec.json.decode(one.alarm, type=Alarm) for one in reader.alarms()]
            found = _rehearsed(plan, reader)
            unwatched = sorted({stream.stream for stream in reader.streams()} - {one.stream for one in found})
    if as_json:
        print_json(
            {
                "alarms": [alarm_document(alarm, []) for alarm in alarms],
                "streams": [msgspec.to_builtins(one) for one in found],
                "not_watched": unwatched,
            }
        )
        return
    for alarm in alarms:
        for line in alarm_lines(alarm, plan.timezone, alarm.raised_at):
            click.echo(line)
    if not alarms:
        click.echo("No alarm would have come.")
    for one in found:
        for line in _lines(one, plan.timezone):
            click.echo(line)
    for stream in unwatched:
        click.echo(f"{plain(stream)}: not watched: no window had enough tail events for a baseline.")


def _on_files(plan: Plan, files: tuple[Path, ...]) -> Plan:
    """The plan reading these files instead of what its feed follows, into a store of its own."""
    missing = [path for path in files if not path.is_file()]
    if missing:
        raise SourceError(f"{missing[0]}: no such file.")
    if len(plan.feeds) != 1:
        raise UsageError("rehearse takes settings with one feed; these have several.")
    feed = msgspec.structs.replace(
        plan.feeds[0], follow=tuple(str(path.resolve()) for path in files), read=None, listen=None
    )
    return msgspec.structs.replace(plan, feeds=(feed,), store="rehearsal.db")


def _run(plan: Plan, folder: Path) -> None:
    clock = SystemClock()
    log = Log(clock, "warning")
    shown = sys.stderr.isatty()
    with Progress(
        TextColumn("rehearsing"), BarColumn(), TextColumn("{task.completed} of {task.total} windows"),
        console=Console(stderr=True), transient=True, disable=not shown,
    ) as progress:  # fmt: skip
        task = progress.add_task("windows", total=None)
        most = 0

        def show(left: int) -> None:
            nonlocal most
            most = max(most, left)
            progress.update(task, total=most, completed=most - left)

        run_daemon(plan, Asked(base=folder, finish=True, on_progress=show), clock, log)


def _rehearsed(plan: Plan, reader: Reader) -> list[Rehearsed]:
    state = restore(plan, plan.distinct, remembered(reader), 0)
    out = []
    for begun in reader.watches():
        panes = reader.pane_contents(begun.stream, -(2**62), 2**62)
        watch = msgspec.json.decode(begun.watch, type=Watch)
        order = watch_order(state, begun.stream, panes[-1].end)
        out.append(
            Rehearsed(
                stream=begun.stream,
                budget_days=watch.budget_days,
                ground=ground_of(begun.stream, panes, watch, order),
                trials=trials(begun.stream, panes, watch, begun.effective_from, order),
            )
        )
    return out


def _lines(one: Rehearsed, zone: str) -> list[str]:
    name = plain(one.stream)
    lines = [f"{name}: {one.ground.words}."]
    for trial in one.trials:
        mark = " (as set)" if abs(trial.budget_days - one.budget_days) < 1e-9 else ""
        spoke = ", ".join(f"{rule} at {moment_text(at, zone)}" for rule, at in trial.spoke.items()) or "nothing"
        lines.append(
            f"  one false alarm in {trial.budget_days:.4g} days{mark}: {spoke}; by chance at most "
            f"{trial.by_chance:.2g} in these {trial.days:.3g} days"
        )
    return lines
