"""The proposed settings as a commented file: each value with its evidence above it, doubts first."""

from __future__ import annotations

import msgspec

from monitor.parse.lines import Field, LineFormat
from monitor.propose.conditions import Condition
from monitor.propose.names import called
from monitor.propose.records import Proposal, Watchable
from monitor.propose.toml_text import comment, key, quoted, value
from monitor.render.safe import plain


class Written(msgspec.Struct, frozen=True, kw_only=True):
    """The values that go into the file."""

    feed: str
    follow: tuple[str, ...]
    format: LineFormat
    unit: str
    pane: str
    window: str
    lateness: str


def settings_text(written: Written, told: Proposal, *, unit_evidence: str, condition: Condition | None) -> str:
    """The file; `tailgauge settings` accepts it as it is."""
    lines = [
        *_head(told), "", f"store = {quoted(written.feed + '.db')}", "",
        *_feed(written, told, unit_evidence, condition), "",
        *_watch(written, told), "", *_streams(told), *_rejected(told),
    ]  # fmt: skip
    return "\n".join(lines).rstrip("\n") + "\n"


def _head(told: Proposal) -> list[str]:
    lines = comment(
        f"Proposed by tailgauge from a sample of {told.sampled_lines} lines ({told.sampled_bytes / 1e6:.2g} MB). Each "
        "value below is a guess, with its evidence above it. Settle the doubts, save this as tailgauge.toml, then:",
        first="# ", hanging="# ",
    )  # fmt: skip
    lines += [f"#   {command}" for command in told.next_commands]
    if told.follow:
        lines.append("# To take in what is already there and stop: tailgauge run tailgauge.toml --finish")
    lines += ["#", "# Doubts, which only a person can settle:"]
    for i, doubt in enumerate(told.doubts, 1):
        lines += comment(doubt, first=f"# {i:2}. ", hanging="#     ")
    return lines


def _feed(written: Written, told: Proposal, unit_evidence: str, condition: Condition | None) -> list[str]:
    format_ = written.format
    lines = [f"[feed.{key(written.feed)}]"]
    lines.append(f"follow = {value(written.follow)}" if written.follow else 'read = "-"')
    lines += [*comment(told.format_evidence), f"lines = {quoted(format_.lines)}"]
    lines += _reading(format_)
    lines += _size(told)
    lines += [*comment(unit_evidence), f"unit = {quoted(written.unit)}"]
    lines += _time(told)
    lines += _stream(told)
    if condition is not None:
        (field, values), *_ = format_.where
        lines += [*comment(condition.evidence), f"where = {{ {key(str(field))} = {value(values)} }}"]
    return lines


def _reading(format_: LineFormat) -> list[str]:
    lines = []
    if format_.lines == "csv":
        if format_.delimiter != ",":
            lines.append(f"delimiter = {quoted(format_.delimiter)}")
        lines.append(f"header = {value(bool(format_.header))}")
    if format_.pattern is not None:
        lines += [*comment("suggested from the lines; the groups are named"), f"pattern = {quoted(format_.pattern)}"]
    return lines


def _size(told: Proposal) -> list[str]:
    lines = comment("; ".join(told.sizes[0].evidence))
    for other in told.sizes[1:5]:
        lines += comment(f"less likely: {called(other.field)}: {'; '.join(other.evidence)}")
    for refused in told.not_sizes[:12]:
        lines += comment(f"not the size: {called(refused.field)}: {refused.why}")
    if told.format.size is not None:
        lines.append(f"size = {value(told.format.size)}")
    return lines


def _time(told: Proposal) -> list[str]:
    if not told.times:
        return comment("no field holds times: the time of arrival counts")
    time = told.times[0]
    order = f"999 in 1000 lines are at most {time.disorder / 1e9:.3g} s behind the latest before them"
    lines = comment(f"{time.kind}, readable on {_percent(time.readable)} lines; {order}")
    assert told.format.time is not None
    lines.append(f"time = {value(told.format.time)}")
    if time.unit != "auto":
        lines.append(f"time_unit = {quoted(time.unit)}")
    if not time.zoned:
        lines.append('# timezone = "Europe/Lisbon"   # of the clock that wrote the stamps, if it was not UTC')
    return lines


def _percent(share: float) -> str:
    return "all" if share == 1 else f"{min(100 * share, 99.99):.4g} % of the"


def _stream(told: Proposal) -> list[str]:
    lines = []
    for i, found in enumerate(told.stream_fields[:5]):
        chosen = i == 0 and bool(told.format.stream)
        lines += comment(
            found.evidence if chosen else f"could also tell streams apart: {called(found.field)}: {found.evidence}"
        )
    if told.format.stream:
        field: Field = told.format.stream[0]
        lines.append(f"stream = {value(field)}")
    else:
        lines += comment("one stream, called like the feed")
    return lines


def _watch(written: Written, told: Proposal) -> list[str]:
    return [
        "[watch]",
        '# Never decided here: "whole" (discrete law) if the size is a count, "measured" otherwise. See the doubts.',
        'counting = "measured"',
        *comment(_pane_evidence(told)),
        f"pane = {quoted(written.pane)}",
        *comment("what one judgement looks back on; long enough for a baseline of the usual stream, if it can be"),
        f"window = {quoted(written.window)}",
        *comment("covers the disorder of nearly all sampled lines"),
        f"lateness = {quoted(written.lateness)}",
        "# limit = 6000                 # the size that must not be passed more often than",
        '# limit_at_most = "1 per 30d"',
        'timezone = "UTC"',
    ]


def _pane_evidence(told: Proposal) -> str:
    if all(stream.events_per_day is None for stream in told.streams):
        return "the usual choice: without times nothing tells how many events a day come"
    return "a pane is judged when it is complete; this one holds a hundred events of the usual stream, if it can"


def _streams(told: Proposal) -> list[str]:
    if not told.streams:
        return []
    lines = ["# What is watchable, if one event in ten is in the tail and a baseline takes 500 tail events:"]
    for stream in told.streams:
        lines += comment(f"{_name(stream)}: {stream.words}", first="#   ", hanging="#     ")
    return [*lines, ""]


def _name(stream: Watchable) -> str:
    return plain(stream.stream)[:80]


def _rejected(told: Proposal) -> list[str]:
    if not told.rejected:
        return ["# None of the sampled lines would be rejected."]
    counts = ", ".join(f"{reason} {count}" for reason, count in sorted(told.rejected.items(), key=lambda i: -i[1]))
    lines = comment(f"Sampled lines that would be rejected: {counts}")
    for line in told.samples:
        lines += comment(f"{line.place}: {line.reason}: {line.text[:160]}", first="#   ", hanging="#     ")
    return lines
