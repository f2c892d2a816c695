"""`tailgauge settings`: print a starter file, or check one and say what is in force."""

from __future__ import annotations

from pathlib import Path

import click
import msgspec

from monitor.cli.output import json_option, load_plan, print_json
from monitor.plan import STARTER, FeedPlan, Plan, StreamPlan
from monitor.plan.spans import span_text


@click.command()
@click.argument("file", type=click.Path(path_type=Path), required=False)
@json_option
def settings(file: Path | None, as_json: bool) -> None:
    """Print a commented starter file, or check FILE and print what is in force."""
    if file is None:
        click.echo(STARTER, nl=False)
        return
    plan = load_plan(file)
    if as_json:
        print_json(_document(plan))
        return
    for line in _lines(plan):
        click.echo(line)


def _document(plan: Plan) -> dict[str, object]:
    document = msgspec.to_builtins(plan)
    assert isinstance(document, dict)
    del document["text"]
    return document


def _lines(plan: Plan) -> list[str]:
    lines = [f"store      {plan.store}"]
    lines += [f"feed       {_feed_words(feed)}" for feed in plan.feeds]
    lines.append(
        f"panes      {span_text(plan.pane)} each; lines may be {span_text(plan.lateness)} out of order; "
        f"a file silent for {span_text(plan.idle)} no longer holds the clock back"
    )
    lines.append(f"judging    {_judging_words(plan.everywhere)}")
    for pattern, changes in plan.overrides:
        lines.append(f"           {pattern}: {', '.join(_change_words(k, v) for k, v in sorted(changes.items()))}")
    for change in plan.known:
        lines.append(f"known      {change.streams}: {change.reason} ({change.effect})")
    return lines


def _feed_words(feed: FeedPlan) -> str:
    where = ", ".join(feed.follow) or "standard input"
    if feed.listen is not None:
        where = f"lines sent to {feed.listen.address}"
    time = f"event time from {feed.format.time}" if feed.format.time is not None else "time of arrival"
    streams = (
        f"one stream a value of {'/'.join(str(field) for field in feed.format.stream)}"
        if feed.by_field
        else "one stream"
    )
    return f"{feed.name}: {where}; {feed.format.lines} lines; {time}; {streams}; sizes in {feed.unit}"


def _judging_words(stream: StreamPlan) -> str:
    limit = f"; limit {stream.limit:g} {stream.unit}" if stream.limit is not None else ""
    return (
        f"{stream.counting} sizes; the last {span_text(stream.window)}; at most {stream.replicates} replicates; "
        f"ruled out at p <= {stream.rule_out:g}{limit}"
    )


def _change_words(key: str, value: object) -> str:
    if key == "planned" and value is not None:
        return f"planned on alpha {value.alpha:g} above {value.xmin:g}"  # type: ignore[attr-defined]
    if key == "window" and isinstance(value, int):
        return f"window {span_text(value)}"
    if key == "limit_at_most":
        return f"at most {value.times:g} per {span_text(value.period)}"  # type: ignore[attr-defined]
    return f"{key} {value}"
