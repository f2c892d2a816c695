"""Tables of plain text that fit a width, and CSV with the units in the column names."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Sequence

import msgspec

from monitor.render.numbers import bounds_text, count_text, estimate, size_text
from monitor.render.safe import padded, plain, shorten, width_of
from monitor.render.seen import Refit
from monitor.render.times import local, table_time, utc_text, zone_name
from monitor.render.words.common import fit_word
from monitor.render.words.findings import flags_in_words
from monitor.tail.judgement import Judgement
from storage.facts import BaselineSet

GAP = "  "


class Column(msgspec.Struct, frozen=True, kw_only=True):
    """A column of text. `need` says how early it is given up when the table is too wide: 0 never, 9 first."""

    title: str
    cells: tuple[str, ...]
    right: bool = False
    need: int = 0
    shrinks_to: int | None = None
    """Cells that the column may be cut to before others are given up; None when it is never cut."""

    @property
    def width(self) -> int:
        """Cells that its widest text takes."""
        return max((width_of(text) for text in (self.title, *self.cells)), default=0)


def laid_out(columns: Sequence[Column], width: int) -> list[str]:
    """Heading and rows, no line wider than `width` cells: columns are cut, then given up, until they fit."""
    kept, widths = chosen(columns, width)
    rows = [[column.title for column in kept]] + [list(row) for row in zip(*(c.cells for c in kept), strict=True)]
    return [shorten(_joined(row, kept, widths), width) for row in rows]


def chosen(columns: Sequence[Column], width: int) -> tuple[list[Column], list[int]]:
    """The columns that fit, and the width of each."""
    kept = [column for column in columns if column.cells or column.title]
    while True:
        widths = [column.width for column in kept]
        over = sum(widths) + len(GAP) * (len(kept) - 1) - width
        for i, column in enumerate(kept):
            if over > 0 and column.shrinks_to is not None:
                cut = min(over, max(0, widths[i] - max(column.shrinks_to, width_of(column.title))))
                widths[i] -= cut
                over -= cut
        first_to_go = max((column.need for column in kept), default=0)
        fewer = [column for column in kept if column.need != first_to_go]
        if over <= 0 or first_to_go == 0 or not fewer:
            return kept, widths
        kept = fewer


def _joined(row: Sequence[str], columns: Sequence[Column], widths: Sequence[int]) -> str:
    cells = [padded(text, w, right=c.right) for text, c, w in zip(row, columns, widths, strict=True)]
    return GAP.join(cells).rstrip()


class RefitRow(msgspec.Struct, frozen=True, kw_only=True):
    """One refit of a table, with the unit of its stream and the baseline it was compared with."""

    refit: Refit
    unit: str
    baseline: BaselineSet | None


def result_words(row: RefitRow) -> str:
    """What came of a refit, in words: findings, 'as baseline', or why there is no result."""
    refit = row.refit
    source = None if row.baseline is None else row.baseline.source
    if refit.state != "done":
        return plain(f"{refit.state}: {refit.reason}" if refit.reason else refit.state)
    if refit.judgement is None or refit.judgement.alpha is None:
        return plain(f"no tail: {(refit.judgement.reason if refit.judgement else None) or 'no reason stored'}")
    if refit.flags:
        return ", ".join(flags_in_words(refit, source))
    if refit.against is None or refit.against.p is None:
        return "nothing to compare with"
    return "as planned" if source == "plan" else "as baseline"


def history_table(rows: Sequence[RefitRow], zone: str, width: int, *, one_stream: bool = False) -> list[str]:
    """Refits as a table in the order given, each line at most `width` cells.

    In a narrow terminal the less important columns are left out; the result in words always stays. With
    one_stream the name and the identity are left out.
    """
    if not rows:
        return ["No refits here yet."]
    zones = {zone_name(local(row.refit.end, zone)) for row in rows}
    # Over a change of the clocks one heading cannot name the zone of every row.
    shared = f" ({zones.pop()})" if len(zones) == 1 else ""
    found = [row.refit.judgement for row in rows]
    ends = tuple(table_time(row.refit.end, zone, named=not shared) for row in rows)
    columns = [
        Column(title="stream", cells=tuple(plain(row.refit.stream) for row in rows), shrinks_to=8),
        Column(title=f"window end{shared}", cells=ends),
        Column(title="events", cells=_cells(found, lambda j: count_text(j.n)), right=True, need=4),
        Column(title="alpha", cells=_cells(found, _alpha), right=True),
        Column(title="95 %", cells=_cells(found, _alpha_bounds), need=3),
        Column(title="p", cells=_cells(found, lambda j: estimate(j.gof.p, j.gof.p_interval) if j.gof else ""),
               right=True),
        Column(title="fit", cells=_cells(found, lambda j: fit_word(j.gof) if j.alpha is not None else ""), need=6),
        Column(title="p 95 %", cells=_cells(found, _p_bounds), need=7),
        Column(title="xmin", cells=_cells(found, lambda j: "" if j.xmin is None else size_text(j.xmin)), right=True,
               need=5),
        Column(title="in tail", cells=_cells(found, lambda j: "" if j.n_tail is None else count_text(j.n_tail)),
               right=True, need=5),
        Column(title=_level_title(found), cells=tuple(_level(row) for row in rows), right=True, need=2),
        Column(title="baseline", cells=tuple(_baseline(row) for row in rows), need=8),
        Column(title="id", cells=tuple(plain(row.refit.id) for row in rows), need=9),
        Column(title="result", cells=tuple(result_words(row) for row in rows), shrinks_to=48),
    ]  # fmt: skip
    if one_stream:
        columns = [column for column in columns if column.title not in ("stream", "id")]
    return laid_out(columns, width)


def _cells(found: Sequence[Judgement | None], text: object) -> tuple[str, ...]:
    assert callable(text)
    return tuple("" if judgement is None else str(text(judgement)) for judgement in found)


def _alpha(judgement: Judgement) -> str:
    return "" if judgement.alpha is None else estimate(judgement.alpha, judgement.alpha_interval)


def _alpha_bounds(judgement: Judgement) -> str:
    if judgement.alpha is None or judgement.alpha_interval is None:
        return ""
    return bounds_text(judgement.alpha, judgement.alpha_interval, join="-")


def _p_bounds(judgement: Judgement) -> str:
    return bounds_text(judgement.gof.p, judgement.gof.p_interval, join="-") if judgement.gof else ""


def _level_title(found: Sequence[Judgement | None]) -> str:
    one_in = {judgement.levels[0].one_in for judgement in found if judgement is not None and judgement.levels}
    return f"1 in {count_text(one_in.pop())}" if len(one_in) == 1 else "level"


def _level(row: RefitRow) -> str:
    levels = row.refit.judgement.levels if row.refit.judgement is not None else ()
    if not levels or levels[0].size is None:
        return ""
    return f"{estimate(levels[0].size, levels[0].interval)} {plain(row.unit)}".rstrip()


def _baseline(row: RefitRow) -> str:
    if row.baseline is None:
        return ""
    return f"{estimate(row.baseline.alpha)} {row.baseline.source}"


# A comma, quote or line end in a unit would be legal in CSV, but nobody could name the column.
_AWKWARD = re.compile(r"[^0-9A-Za-z%_./-]+")


def unit_suffix(unit: str) -> str:
    """The unit as the end of a column name: 'units' -> '_units'; empty without one."""
    name = _AWKWARD.sub("_", plain(unit)).strip("_")
    return f"_{name}" if name else ""


def history_csv(rows: Sequence[RefitRow]) -> str:
    """Refits as CSV (RFC 4180, line ends LF), units in the column names where all rows share one."""
    units = {row.unit for row in rows}
    suffix = unit_suffix(units.pop()) if len(units) == 1 else ""
    levels = sorted({level.one_in for row in rows if row.refit.judgement for level in row.refit.judgement.levels})
    out = io.StringIO()
    table = csv.writer(out, lineterminator="\n")
    table.writerow(
        ["id", "stream", "state", "window_from_utc", "window_to_utc", "panes", "unit", "events", "alpha", "alpha_low",
         "alpha_high", f"xmin{suffix}", "tail_events", "ks_distance", "p", "p_low", "p_high",
         *(f"size_one_in_{m}{part}{suffix}" for m in levels for part in ("", "_low", "_high")),
         "baseline_source", "baseline_alpha", f"baseline_xmin{suffix}", "alpha_above_baseline_xmin", "difference_p",
         "direction", "flags", "result"]
    )  # fmt: skip
    for row in rows:
        table.writerow(["" if value is None else value for value in _csv_row(row, levels)])
    return out.getvalue()


def _csv_row(row: RefitRow, levels: Sequence[int]) -> list[object]:
    refit, judgement, base, against = row.refit, row.refit.judgement, row.baseline, row.refit.against
    values: list[object] = [
        refit.id, _csv_text(refit.stream), refit.state, utc_text(refit.start), utc_text(refit.end), refit.panes,
        _csv_text(row.unit),
    ]  # fmt: skip
    values += _csv_judgement(judgement, levels)
    values += [None] * 3 if base is None else [base.source, base.alpha, base.xmin]
    values += [None] * 3 if against is None else [against.alpha_later, against.p, against.direction]
    flags = "; ".join(flags_in_words(refit, None if base is None else base.source))
    return [*values, flags, result_words(row)]


def _csv_judgement(judgement: Judgement | None, levels: Sequence[int]) -> list[object]:
    if judgement is None:
        return [None] * (10 + 3 * len(levels))
    gof = judgement.gof
    values: list[object] = [
        judgement.n, judgement.alpha, *(judgement.alpha_interval or (None, None)), judgement.xmin, judgement.n_tail,
        judgement.ks_distance, *((gof.p, *gof.p_interval) if gof is not None else (None, None, None)),
    ]  # fmt: skip
    by_level = {level.one_in: level for level in judgement.levels}
    for one_in in levels:
        level = by_level.get(one_in)
        values += [None] * 3 if level is None else [level.size, *level.interval]
    return values


def _csv_text(text: str) -> str:
    """Harmless to a terminal, and to a spreadsheet, which would run a text that starts like a formula."""
    safe = plain(text)
    return f"'{safe}" if safe[:1] in ("=", "+", "-", "@") else safe
