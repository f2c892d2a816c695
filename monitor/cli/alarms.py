"""`tailgauge alarms`: what was raised, and its history; `tailgauge baseline`: what watching compares with."""

from __future__ import annotations

import csv
import sys
import time
from collections.abc import Iterable, Iterator
from itertools import groupby
from pathlib import Path

import click
import msgspec

from monitor.alarms.alarm import Alarm, AlarmChange
from monitor.cli.output import in_option, json_option, open_place, plan_of, print_json
from monitor.render.alarm_documents import alarm_document
from monitor.render.safe import plain
from monitor.render.times import moment_text
from monitor.render.words.alarm import state_words
from storage.facts import AlarmMoved, BaselineSet
from storage.history import Reader


@click.command()
@click.option("--standing", is_flag=True, help="Only those that still ask for something; exit code 1 if there is any.")
@click.option("--csv", "as_csv", is_flag=True, help="Print CSV.")
@json_option
@in_option
def alarms(*, standing: bool, as_csv: bool, as_json: bool, place: Path) -> int:
    """List alarms, newest last, each with what it says, since when, and what was done about it."""
    with open_place(place) as reader:
        found = [msgspec.json.decode(one.alarm, type=Alarm) for one in reader.alarms(only_open=standing)]
        moves = _by_alarm(reader)
        zone = plan_of(reader).timezone
    documents = [alarm_document(alarm, moves.get(alarm.id, [])) for alarm in found]
    if as_json:
        print_json(documents)
    elif as_csv:
        _print_csv(documents)
    elif not found:
        click.echo("No alarm stands." if standing else "No alarm yet.")
    else:
        for alarm in found:
            for line in alarm_lines(alarm, zone, time.time_ns()):
                click.echo(line)
            for line in history_lines(moves.get(alarm.id, []), zone):
                click.echo(f"  {line}")
    return 1 if standing and found else 0


def alarm_lines(alarm: Alarm, zone: str, now: int) -> list[str]:
    """One alarm in words: what it says, how it stands, and the id to name it by."""
    raised = moment_text(alarm.raised_at, zone)
    return [
        plain(alarm.message),
        f"  {alarm.id}  {state_words(alarm, zone, now)}; {alarm.priority} priority, rule {alarm.rule}, raised {raised}",
    ]


def changes_of(moves: Iterable[AlarmMoved]) -> list[AlarmChange]:
    """Rows of a history as the records of the alarm."""
    return [
        AlarmChange(
            alarm=move.alarm, at=move.at, from_state=move.from_state, to_state=move.to_state,  # type: ignore[arg-type]
            cause=move.cause, by=move.by, note=move.note,
        )
        for move in moves
    ]  # fmt: skip


def _by_alarm(reader: Reader) -> dict[str, list[AlarmChange]]:
    out: dict[str, list[AlarmChange]] = {}
    for change in changes_of(reader.alarm_moves()):
        out.setdefault(change.alarm, []).append(change)
    return out


def history_lines(changes: Iterable[AlarmChange], zone: str) -> Iterator[str]:
    """An alarm's history, a line each; what only repeats is told once, with how often and until when."""
    for _, run in groupby(changes, key=lambda change: (change.from_state, change.to_state, change.cause, change.note)):
        same = list(run)
        again = f", {len(same) - 1} more until {moment_text(same[-1].at, zone)}" if len(same) > 1 else ""
        yield _change_words(same[0], zone) + again


def _change_words(change: AlarmChange, zone: str) -> str:
    by = f" by {plain(change.by)}" if change.by else ""
    note = f": {plain(change.note)}" if change.note else ""
    same = change.from_state == change.to_state
    turn = change.to_state if same else f"{change.from_state} -> {change.to_state}"
    return f"{moment_text(change.at, zone)}  {turn} ({change.cause}){by}{note}"


COLUMNS = ("id", "stream", "rule", "state", "priority", "raised_at", "raised_after_events", "direction", "changed_at",
           "before", "after", "unit", "message")  # fmt: skip


def _print_csv(documents: list[dict[str, object]]) -> None:
    writer = csv.writer(sys.stdout, lineterminator="\n")
    writer.writerow(COLUMNS)
    writer.writerows([document[column] for column in COLUMNS] for document in documents)


@click.command()
@click.option("--stream", help="Only this stream.")
@json_option
@in_option
def baseline(*, stream: str | None, as_json: bool, place: Path) -> None:
    """Show what watching compares with: where it comes from, since when it counts."""
    with open_place(place) as reader:
        held = reader.baselines(stream)
        zone = plan_of(reader).timezone
    if as_json:
        print_json([msgspec.to_builtins(one) for one in held])
        return
    for one in held:
        click.echo(_baseline_words(one, zone))
    if not held:
        click.echo("No baseline yet: none is planned, and no window has had enough tail events.")


def _baseline_words(held: BaselineSet, zone: str) -> str:
    source = {"plan": "the plan", "first window": "the first window with enough tail", "accepted": "an accepted change"}
    tail = "" if held.n_tail is None else f", {held.n_tail} tail events of {held.n}"
    fit = "" if held.plausible is not False else "; a power law is not plausible there"
    return (
        f"{plain(held.stream)}: alpha {held.alpha:.3f} above {held.xmin:g}, from {source[held.source]}{tail}; "
        f"counts from {moment_text(held.effective_from, zone)} on{fit}"
    )
