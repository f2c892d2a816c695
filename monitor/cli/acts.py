"""What people do with alarms: acknowledge, shelve, take out of service, note, decide. The engine decides on each."""

from __future__ import annotations

import getpass
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any, get_args

import click
import msgspec

from monitor.alarms.alarm import Alarm
from monitor.alarms.decisions import MEANINGS
from monitor.alarms.states import Choice
from monitor.cli.alarms import alarm_lines, changes_of
from monitor.cli.output import in_option, json_option, open_place, plan_of, print_json
from monitor.cli.reading import moment
from monitor.engine.alarming import Act
from monitor.errors import MonitorError, UsageError
from monitor.plan import Plan
from monitor.plan.spans import parse_span
from monitor.render.alarm_documents import alarm_document
from monitor.render.safe import plain
from monitor.service.acting import carry_out
from monitor.service.clock import SystemClock
from storage.history import Reader


class Refused(MonitorError):  # noqa: N818 - an answer, not a fault
    """The engine says no to what was asked."""

    exit_code = 1


def act_options(command: Callable[..., Any]) -> Callable[..., Any]:
    """--by, --note, --in and --json, as every act has them."""
    command = json_option(in_option(command))
    command = click.option("--note", default="", help="Why, in your words; kept with the act.")(command)
    return click.option("--by", default=None, help="Who does it.  [default: the name you are logged in by]")(command)


def _by(by: str | None) -> str:
    if by is not None:
        return by
    try:
        return getpass.getuser()
    except (KeyError, OSError):
        raise UsageError("--by: your login has no name here; say who does it.") from None


def _alarm(reader: Reader, wanted: str) -> Alarm:
    """The alarm whose id begins like that. Raises UsageError when none does, or several do."""
    found = [stored for stored in reader.alarms() if stored.id.startswith(wanted.lower())]
    if len(found) != 1:
        problem = "no alarm has an id that begins so" if not found else f"{len(found)} alarms begin so"
        raise UsageError(f'"{plain(wanted)}": {problem}. `tailgauge alarms` lists them.')
    return msgspec.json.decode(found[0].alarm, type=Alarm)


def _carry_out(place: Path, wanted: str | None, as_json: bool, make: Callable[[Alarm | None, Plan], Act]) -> None:
    with open_place(place) as reader:
        plan, path = plan_of(reader), reader.path
        alarm = None if wanted is None else _alarm(reader, wanted)
    act = make(alarm, plan)
    answer = carry_out(path, plan, act, SystemClock())
    if as_json:
        print_json({"alarm": alarm.id if alarm else None, "outcome": answer.outcome, "answer": answer.words})
    elif answer.outcome != "refused":
        click.echo(f"{answer.outcome}: {answer.words}" if answer.words else answer.outcome)
    if answer.outcome == "refused":
        raise Refused(f"refused: {answer.words}.")


def _simple(name: str, words: str) -> click.Command:
    """An act on one alarm that needs nothing but who and why."""

    @click.command(name, help=words)
    @click.argument("id")
    @act_options
    def command(*, id: str, by: str | None, note: str, place: Path, as_json: bool) -> None:  # noqa: A002
        who = _by(by)
        _carry_out(
            place, id, as_json,
            lambda alarm, _: Act(act=name, by=who, alarm=alarm.id if alarm else None, note=note),  # type: ignore[arg-type]
        )  # fmt: skip

    return command


acknowledge = _simple("acknowledge", "Say that you have seen the alarm ID.")
unshelve = _simple("unshelve", "Hear of the alarm ID again.")
out_of_service = _simple("out-of-service", "Take the alarm ID out of service; --note says why.")
in_service = _simple("in-service", "Put the alarm ID back in service.")


@click.command()
@click.argument("id")
@click.option("--for", "span", required=True, help="For how long, such as 2h or 3d.")
@act_options
def shelve(*, id: str, span: str, by: str | None, note: str, place: Path, as_json: bool) -> None:  # noqa: A002
    """Hear nothing of the alarm ID for a while; it always comes back."""
    ns = parse_span(span)
    if not ns:
        raise UsageError(f'--for: "{plain(span)}" is not a span of time; expected such as "2h" or "3d".')
    who, until = _by(by), time.time_ns() + ns
    _carry_out(
        place, id, as_json,
        lambda alarm, _: Act(act="shelve", by=who, alarm=alarm.id if alarm else None, note=note, until=until),
    )  # fmt: skip


@click.command()
@click.argument("words", nargs=-1, required=True, metavar="[ID] TEXT")
@click.option("--at", help="The moment that the note speaks of, when it is about no alarm.")
@act_options
def note(*, words: tuple[str, ...], at: str | None, by: str | None, note: str, place: Path, as_json: bool) -> None:
    """Write a note into the history of the alarm ID, or about a moment."""
    del note  # the text is the argument here
    wanted, text = (None, words[0]) if len(words) == 1 else (words[0], " ".join(words[1:]))
    who = _by(by)
    _carry_out(
        place, wanted, as_json,
        lambda alarm, plan: Act(
            act="note", by=who, alarm=alarm.id if alarm else None, note=text, at=moment(at, plan.timezone)
        ),
    )  # fmt: skip


@click.command()
@click.argument("id")
@click.argument("choice", type=click.Choice(get_args(Choice)), required=False)
@click.option("--until", help="Until when: for wait; the end of what was planned or at fault.")
@act_options
def decide(
    *, id: str, choice: Choice | None, until: str | None, by: str | None, note: str, place: Path, as_json: bool  # noqa: A002
) -> None:  # fmt: skip
    """Conclude something from the alarm ID. Without a choice: show before and after, and what each choice does."""
    if choice is None:
        with open_place(place) as reader:
            alarm, plan = _alarm(reader, id), plan_of(reader)
            moves = changes_of(reader.alarm_moves(alarm.id))
        if as_json:
            print_json({**alarm_document(alarm, moves), "choices": MEANINGS})
            return
        for line in alarm_lines(alarm, plan.timezone, time.time_ns()):
            click.echo(line)
        for name, meaning in MEANINGS.items():
            click.echo(f"  {name}: {meaning}")
        return
    who = _by(by)
    _carry_out(
        place, id, as_json,
        lambda alarm, plan: Act(
            act="decide", by=who, alarm=alarm.id if alarm else None, note=note, choice=choice,
            until=moment(until, plan.timezone),
        ),
    )  # fmt: skip
