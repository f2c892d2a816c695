"""`tailgauge history`: the stored refits, newest last, as a table, CSV or JSON."""

from __future__ import annotations

import shutil
from pathlib import Path

import click

from monitor.cli.output import in_option, json_option, open_place, plan_of, print_json
from monitor.cli.reading import decoded, moment, unknown_stream
from monitor.errors import UsageError
from monitor.plan import Plan
from monitor.render.documents import refit_document
from monitor.render.seen import baseline_of
from monitor.render.tables import RefitRow, history_csv, history_table
from storage.history import Reader

WIDTH_WITHOUT_TERMINAL = 80


@click.command()
@click.option("--stream", metavar="S", help="Only this stream.")
@click.option("--from", "start", metavar="T", help="Only windows that end at T or later.")
@click.option("--to", "end", metavar="T", help="Only windows that end at T or before.")
@click.option("--last", type=click.IntRange(min=1), metavar="N", help="Only the newest N of each stream.")
@json_option
@click.option("--csv", "as_csv", is_flag=True, help="Print CSV, units in the column names.")
@in_option
def history(
    *, stream: str | None, start: str | None, end: str | None, last: int | None, as_json: bool, as_csv: bool,
    place: Path,
) -> None:  # fmt: skip
    """The stored refits, newest last.

    T is a time such as 2026-12-01T14:05:00Z, or without a zone in the plan's own (2026-12-01 14:05), or a
    date: the start of that day for --from, its end for --to.
    """
    if as_json and as_csv:
        raise UsageError("--json and --csv exclude each other; name one.")
    with open_place(place) as reader, reader.snapshot():
        plan = plan_of(reader)
        rows = _rows(reader, plan, stream, (moment(start, plan.timezone), moment(end, plan.timezone, last=True)), last)
    if as_json:
        print_json([refit_document(row.refit, row.unit, row.baseline) for row in rows])
    elif as_csv:
        click.echo(history_csv(rows), nl=False)
    else:
        width = shutil.get_terminal_size((WIDTH_WITHOUT_TERMINAL, 24)).columns
        for line in history_table(rows, plan.timezone, width):
            click.echo(line)


def _rows(
    reader: Reader, plan: Plan, stream: str | None, span: tuple[int | None, int | None], last: int | None
) -> list[RefitRow]:
    feeds = {state.stream: state for state in reader.streams()}
    if stream is not None and stream not in feeds:
        raise unknown_stream(stream, feeds)
    baselines = reader.baselines(stream)
    rows = []
    for stored in reader.refits(stream, span[0], span[1], last):
        refit = decoded(stored, reader.path)
        state = feeds.get(refit.stream)
        unit = plan.stream(refit.stream, state.unit if state is not None else "").unit
        rows.append(RefitRow(refit=refit, unit=unit, baseline=baseline_of(refit, baselines)))
    return rows
