"""`tailgauge promise`: how often a watch cries wolf and how soon it sees a shift, before it is switched on."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import Any

import click
import msgspec

from monitor.cli.output import json_option, load_plan, print_json, store_path
from monitor.errors import UsageError
from monitor.plan.spans import DAY, parse_span
from monitor.render.words.promise import promise_sentences
from monitor.watch.rules import Watch, stream_budget
from monitor.watch.runlength import Promise, Setting, alpha_delay, promise
from storage.errors import StoreMissing
from storage.history import open_reader

DEFAULT_BUDGET = "90d"
COST_SHIFT = -0.3
"""The change of alpha whose delay is priced: one a year is assumed."""


@click.command("promise")
@click.argument("settings", type=click.Path(path_type=Path), required=False)
@click.option("--alpha", type=click.FloatRange(min=1.0, min_open=True), help="Exponent of the density.")
@click.option(
    "--share", type=click.FloatRange(0.0, 1.0, min_open=True, max_open=True), help="Share of events in the tail."
)
@click.option("--rate", type=click.FloatRange(min=0.0, min_open=True), help="Events a day.")
@click.option("--budget", help="Time allowed between false alarms, such as 90d.  [default: of the settings, else 90d]")
@click.option("--prior", type=click.IntRange(min=2), help="Tail events of the baseline.  [default: its own, else 4000]")
@click.option("--cost-false", type=click.FloatRange(min=0.0), help="What a false alarm costs.")
@click.option(
    "--cost-late-day", type=click.FloatRange(min=0.0), help="What a day costs by which a change is seen late."
)
@json_option
def promise_command(**asked: Any) -> None:
    """Tell the run lengths of a watch: for the streams that SETTINGS watch already, or for given figures.

    With both costs, and one change a year of 0.3 in alpha assumed, the yearly cost of other budgets is told as well.
    """
    told = {name: promise(setting) for name, setting in _settings(asked)}
    costs = {name: _costs(found, asked) for name, found in told.items()}
    if asked["as_json"]:
        print_json(
            [{"stream": name, **msgspec.to_builtins(found), "costs": costs[name]} for name, found in told.items()]
        )
        return
    for name, found in told.items():
        for line in promise_sentences(name, found, costs[name]):
            click.echo(line)


def _settings(asked: dict[str, Any]) -> Iterator[tuple[str, Setting]]:
    if asked["settings"] is not None:
        yield from _of_streams(asked["settings"], asked)
        return
    missing = [f"--{key}" for key in ("alpha", "share", "rate") if asked[key] is None]
    if missing:
        raise UsageError(f"{', '.join(missing)}: needed where no settings file is given.")
    yield (
        "",
        Setting(
            alpha=asked["alpha"], share=asked["share"], events_a_day=asked["rate"],
            budget_days=_days(asked["budget"] or DEFAULT_BUDGET), prior=asked["prior"] or 4000,
        ),
    )  # fmt: skip


def _of_streams(path: Path, asked: dict[str, Any]) -> Iterator[tuple[str, Setting]]:
    """The streams that a store knows, with what their watch was begun on."""
    plan = load_plan(path)
    try:
        with open_reader(store_path(path, plan)) as reader:
            streams = reader.streams()
            watches = {begun.stream: msgspec.json.decode(begun.watch, type=Watch) for begun in reader.watches()}
    except StoreMissing:
        raise UsageError(
            f"{path}: nothing was watched on these settings yet, so rates and shares are not known. "
            "Give --alpha, --share and --rate instead."
        ) from None
    for stream in streams:
        watch = watches.get(stream.stream)
        days = (stream.newest - stream.first) / DAY
        if watch is not None and days > 0:
            setting = _of_watch(watch, asked, stream.events / days, len(streams))
            if setting is not None:
                yield stream.stream, setting


def _of_watch(watch: Watch, asked: dict[str, Any], events_a_day: float, streams: int) -> Setting | None:
    base = watch.baseline
    alpha = asked["alpha"] or base.alpha
    share = asked["share"] or base.share
    if alpha is None or share is None or not 0 < share < 1:
        return None
    budget = stream_budget(_days(asked["budget"]), streams) if asked["budget"] else watch.budget_days
    return Setting(
        alpha=alpha, share=share, events_a_day=asked["rate"] or events_a_day, budget_days=budget,
        prior=asked["prior"] or (None if base.log_sizes.known else base.exceedances),
        weights={one.rule: one.weight for one in watch.rules},
    )  # fmt: skip


def _days(text: str) -> float:
    span = parse_span(text)
    if not span:
        raise UsageError(f'--budget: "{text}" is not a span of time; expected such as "90d".')
    return span / DAY


def _costs(found: Promise, asked: dict[str, Any]) -> list[dict[str, Any]]:
    """Yearly cost of several budgets, with one change a year; the cheapest is marked."""
    if asked["cost_false"] is None or asked["cost_late_day"] is None:
        return []
    rows = []
    for factor in (0.25, 0.5, 1.0, 2.0, 4.0, 8.0):
        setting = msgspec.structs.replace(found.setting, budget_days=found.setting.budget_days * factor)
        delay = alpha_delay(setting, COST_SHIFT).days_mean
        false_a_year = 365.25 / setting.budget_days
        late = min(delay, 365.25) if delay is not None else 365.25
        cost = false_a_year * asked["cost_false"] + late * asked["cost_late_day"]
        rows.append(
            {"budget_days": setting.budget_days, "false_a_year": false_a_year, "late_days": delay, "cost": cost}
        )
    cheapest = min(row["cost"] for row in rows)
    return [{**row, "cheapest": row["cost"] == cheapest} for row in rows]
