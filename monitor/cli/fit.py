"""`tailgauge fit`: one sample, one judgement."""

from __future__ import annotations

import sys
import time
from pathlib import Path
from typing import TYPE_CHECKING, Any, Literal, get_args

import click
import msgspec
from rich.console import Console
from rich.progress import BarColumn, Progress, TaskID, TextColumn, TimeRemainingColumn

from monitor import VERSION
from monitor.cli.chart import check_chart_place, write_chart
from monitor.cli.output import json_option, print_json
from monitor.cli.sizes import Sizes, read_sizes
from monitor.errors import UsageError
from monitor.parse.lines import Field, FormatError, LineFormat
from monitor.plan.spans import DAY, parse_span
from monitor.render.safe import plain
from monitor.render.times import plural
from monitor.render.words.fit import fit_sentences
from monitor.tail.judgement import Judgement, Options, as_document
from monitor.tail.sample import Sample

if TYPE_CHECKING:
    from monitor.tail.judge import Judged

Lines = Literal["json", "csv", "combined", "pairs", "number", "pattern"]
BY_SUFFIX: dict[str, Lines] = {".csv": "csv", ".json": "json", ".jsonl": "json", ".ndjson": "json"}
SHOW_AFTER = 2.0
"""Seconds before a progress bar appears."""


@click.command()
@click.argument("files", nargs=-1, metavar="[FILE]...")
@click.option(
    "--lines", type=click.Choice(get_args(Lines)), help="Format of the lines; else by the file's suffix, or number."
)
@click.option("--size", help="Where the size stands: field, column name or number, group.")
@click.option("--unit", default="", help="What sizes are counted in.")
@click.option("--where", multiple=True, metavar="FIELD=VALUE[,VALUE]", help="Only lines whose field is one of these.")
@click.option("--pattern", help="The regular expression of --lines pattern.")
@click.option(
    "--counting",
    type=click.Choice(("measured", "whole")),
    default="measured",
    show_default=True,
    help="Continuous or discrete law; never guessed from the data.",
)
@click.option("--xmin", type=float, help="Lower end of the tail; else chosen by the smallest KS distance.")
@click.option("--min-tail", type=click.IntRange(min=2), default=10, show_default=True, help="Least events of a tail.")
@click.option(
    "--replicates",
    type=click.IntRange(min=0),
    default=2500,
    show_default=True,
    help="Most bootstrap samples; 0 leaves the goodness of fit out.",
)
@click.option("--all-replicates", is_flag=True, help="Run all of them, even when p is decided early.")
@click.option(
    "--rule-out",
    type=click.FloatRange(0.0, 0.5, min_open=True),
    default=0.1,
    show_default=True,
    help="p at or below this rules a power law out.",
)
@click.option("--seed", type=click.IntRange(0, 2**53 - 1), default=1, show_default=True)
@click.option(
    "--one-in", type=click.IntRange(min=2), multiple=True, help="Tell the size passed once in so many events."
)
@click.option("--limit", type=click.FloatRange(min=0.0, min_open=True), help="Tell the chance of passing this size.")
@click.option("--per", default="30d", show_default=True, help="The period that --limit is asked for.")
@click.option("--time", "time_field", help="Where the event time stands; gives the rate that --limit needs.")
@click.option("--no-rivals", is_flag=True, help="Leave the comparison with other tails out.")
@click.option(
    "--chart",
    type=click.Path(path_type=Path),
    metavar="FILE.svg",
    help="Draw the data, the fit and its rivals into this file; an SVG that is there is replaced, nothing else is.",
)
@json_option
def fit(**asked: Any) -> None:
    """Judge the tail of one sample: FILEs, or - for standard input.

    Prints sentences; with --json one document. A sample without a usable tail is an answer, not an error.
    """
    files = asked["files"] or ("-",)
    if files == ("-",) and sys.stdin.isatty():
        raise UsageError("no FILE given, and nothing is piped in. Name a file, or - for standard input.")
    if asked["chart"] is not None:
        check_chart_place(asked["chart"], files)
    bar = _LateBar()
    with bar:
        found = read_sizes(files, _line_format(files, asked), bar.bytes_read)
        sample = Sample.of_sizes(found.sizes)
        judged = _judged(sample, found.days, asked, bar)
    try:
        # Before the words: their reader may have enough of them (`| head`), which ends the command.
        if asked["chart"] is not None:
            _draw(sample, judged, asked)
    finally:
        _print(judged.judgement, found, asked)


def _draw(sample: Sample, judged: Judged, asked: dict[str, Any]) -> None:
    # Loads the drawing library: only for those who want a picture.
    from monitor.render.tail_picture import TailPicture, tail_picture

    picture = TailPicture(
        sample=sample, judgement=judged.judgement, unit=asked["unit"], draws=judged.draws, limit=asked["limit"]
    )
    write_chart(asked["chart"], tail_picture(picture))


def _print(judgement: Judgement, found: Sizes, asked: dict[str, Any]) -> None:
    if asked["as_json"]:
        print_json(_document(judgement, found, asked["unit"]))
        return
    for line in [*fit_sentences(judgement, asked["unit"]), *_account(found)]:
        click.echo(line)


def _judged(sample: Sample, days: float | None, asked: dict[str, Any], bar: _LateBar) -> Judged:
    # Loads the compiled loops: only now, so that a wrong option is told at once.
    from monitor.tail.judge import Judged, judge_with_draws

    per = parse_span(asked["per"])
    if not per:
        raise UsageError(f'--per: "{asked["per"]}" is not a span of time; expected such as "30d" or "12h".')
    options = Options(
        counting=asked["counting"], xmin=asked["xmin"], min_tail=asked["min_tail"], replicates=asked["replicates"],
        stop_early=not asked["all_replicates"], rule_out=asked["rule_out"], seed=asked["seed"],
        one_in=tuple(sorted(set(asked["one_in"]))) or (10_000,), limit=asked["limit"],
        period_days=per / DAY if asked["limit"] is not None else None,
        events_per_day=sample.n / days if days else None, rivals=not asked["no_rivals"], threads=2,
    )  # fmt: skip
    judged = judge_with_draws(sample, options, progress=bar.replicates_done)
    judgement = judged.judgement
    if asked["limit"] is not None and judgement.limit is None and judgement.alpha is not None:
        missing = "--limit needs the rate of events: name the field of the event time with --time"
        judgement = msgspec.structs.replace(judgement, warnings=(*judgement.warnings, missing))
    return Judged(judgement, judged.draws)


def _line_format(files: tuple[str, ...], asked: dict[str, Any]) -> LineFormat:
    suffix = Path(files[0].removesuffix(".gz")).suffix.lower()
    lines: Lines = asked["lines"] or BY_SUFFIX.get(suffix, "number")
    if lines not in ("number", "combined") and asked["size"] is None:
        raise UsageError(f"--size: {lines} lines need to be told where the size stands, such as --size units.")
    where = []
    for condition in asked["where"]:
        name, equals, values = condition.partition("=")
        if not equals or not name:
            raise UsageError(f'--where: "{condition}" is not FIELD=VALUE.')
        where.append((_field(name), tuple(values.split(","))))
    line_format = LineFormat(
        lines=lines, size=None if asked["size"] is None else _field(asked["size"]), pattern=asked["pattern"],
        time=None if asked["time_field"] is None else _field(asked["time_field"]), where=tuple(where),
    )  # fmt: skip
    try:
        # Refuse here, where it is a matter of options, not of settings.
        from monitor.parse import compile_parser

        compile_parser(line_format)
    except FormatError as error:
        raise UsageError(f"--{error}") from None
    return line_format


def _field(text: str) -> Field:
    return int(text) if text.isdigit() else text


def _document(judgement: Judgement, found: Sizes, unit: str) -> dict[str, Any]:
    document = as_document(judgement)
    return {
        "n": document.pop("n"),
        "rejected": dict(found.rejected),
        "skipped": dict(found.skipped),
        "unit": unit,
        **document,
        "version": VERSION,
    }


def _account(found: Sizes) -> list[str]:
    """What became of the lines that gave no size, with a few of them."""
    lines = []
    if found.skipped:
        lines.append("Skipped: " + ", ".join(f"{count} {reason}" for reason, count in sorted(found.skipped.items())))
    if found.rejected:
        total = sum(found.rejected.values())
        reasons = ", ".join(f"{count} {reason}" for reason, count in sorted(found.rejected.items()))
        lines.append(f"Rejected: {plural(total, 'line')} ({reasons}), for example")
        for place, line in found.samples:
            text = plain(line.text.decode("utf-8", "replace"))
            lines.append(f"  {plain(place)}: {line.reason}: {text[:120]}")
    return lines


class _LateBar:
    """Progress on standard error, only on a terminal and only when the work takes more than two seconds."""

    def __init__(self) -> None:
        self._progress = Progress(
            TextColumn("{task.description}"), BarColumn(), TextColumn("{task.completed:.0f}"), TimeRemainingColumn(),
            console=Console(stderr=True), transient=True,
        )  # fmt: skip
        self._able = sys.stderr.isatty()
        self._since = time.monotonic()
        self._shown = False
        self._task: TaskID | None = None

    def __enter__(self) -> _LateBar:
        return self

    def __exit__(self, *_: object) -> None:
        if self._shown:
            self._progress.stop()

    def bytes_read(self, count: int) -> None:
        """So many bytes more were read."""
        self._show("reading", None, count >> 10, advance=True)

    def replicates_done(self, done: int, total: int) -> None:
        """So many replicates of the bootstrap are done."""
        self._show("bootstrap", total, done, advance=False)

    def _show(self, words: str, total: int | None, amount: int, *, advance: bool) -> None:
        if not self._able or time.monotonic() - self._since < SHOW_AFTER:
            return
        if not self._shown:
            self._progress.start()
            self._shown = True
        if self._task is None:
            self._task = self._progress.add_task(words, total=total)
        self._progress.update(self._task, description=words, total=total)
        if advance:
            self._progress.advance(self._task, amount)
        else:
            self._progress.update(self._task, completed=amount)
