"""The picture of one judged sample: the share of events at or above each size, on logarithmic axes, as SVG.

A straight line is a power law. Dots are data, dark in the tail and pale below it; the fitted line lies over its
95 % band; each rival has its own dashes, and every line is named beside its end, so that nothing is told by colour
alone.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import log10

import numpy as np

from monitor.render.numbers import bounds_text, count_text, percent, size_text, with_bounds
from monitor.render.safe import shorten, wrapped
from monitor.render.svg import (
    BLUE,
    HAIR,
    INK,
    MUTED,
    OCHRE,
    PALE,
    RUST,
    TEAL,
    VIOLET,
    Anchor,
    Ink,
    Sheet,
    Stroke,
    svg_sheet,
)
from monitor.render.tail_curves import Curve, Curves, RivalCurve, curves_of, is_drawn
from monitor.render.tail_plane import Ends, Plane, ends_of, minor_ticks, seen_points, share_ticks, shares, size_ticks
from monitor.render.times import plural
from monitor.render.words.common import CAUTION, limit_words, p_words, size_with_unit
from monitor.render.words.fit import fit_sentences, no_tail_words, rival_verdict, verdict_words
from monitor.tail.judgement import Judgement
from monitor.tail.sample import Sample
from monitor.tail.tail_fit import Draws

WIDTH = 940
_EDGE = 28.0
_LEFT, _RIGHT = 112.0, 648.0
_PLOT_HEIGHT = 400.0
_COLUMN = _RIGHT + 28
"""Where the names of the lines begin: their samples first."""
_SAMPLE = 26.0
_HEADLINE, _PLAIN, _SMALL = 14.0, 11.5, 10.5
_LETTER = 6.2
"""Pixels that a letter of small text takes, by the widest of the common faces."""
_LINE = 15.0
_LONGEST_UNIT = 24

_FIT = Stroke(BLUE, 2.0)
_RIVALS: dict[str, Stroke] = {
    "lognormal": Stroke(RUST, 1.4, (7.0, 3.0)),
    "exponential": Stroke(VIOLET, 1.4, (1.6, 2.2)),
    "stretched exponential": Stroke(TEAL, 1.4, (8.0, 2.5, 1.6, 2.5)),
    "power law with cut-off": Stroke(OCHRE, 1.4, (3.5, 2.5)),
}


@dataclass(frozen=True, slots=True, kw_only=True)
class TailPicture:
    """What is drawn.

    sample     all events
    judgement  what was found of them
    unit       of the sizes, any text, may be empty
    draws      the bootstrap's refits, for the band; None leaves it out
    limit      the size that must not be passed too often, or None
    """

    sample: Sample
    judgement: Judgement
    unit: str
    draws: Draws | None = None
    limit: float | None = None


@dataclass(frozen=True, slots=True)
class _Entry:
    """What is written beside the end of a line, and where it wants to stand: a height in pixels."""

    name: str
    lines: tuple[str, ...]
    ink: Ink
    stroke: Stroke | None
    wanted: float
    joined: bool
    """Does the line end at the right side, so that a stroke can lead from there to its name?"""

    @property
    def height(self) -> float:
        """Pixels that it takes."""
        return _LINE * (1 + len(self.lines)) + 9


def tail_picture(picture: TailPicture) -> str:
    """The picture as an SVG document, 940 pixels wide, for any judgement, with a tail or without.

    Equal input gives equal bytes. The document's title is the verdict, its description every sentence that `fit`
    prints. Readable in light and dark.
    """
    unit = shorten(picture.unit, _LONGEST_UNIT)
    ends = ends_of(picture.sample, picture.judgement, picture.limit)
    curves = curves_of(picture.sample, picture.judgement, picture.draws, ends)
    head, notes = _head(picture, unit), _notes(picture, ends, unit, curves)
    limited = _limit_drawn(picture, ends)
    top = _EDGE + 20 * len(head.verdict) + 17 * len(head.more) + (52 if limited else 34)
    plane = Plane(
        left=ends.left, right=ends.right, bottom=ends.bottom, x0=_LEFT, x1=_RIGHT, y0=top, y1=top + _PLOT_HEIGHT
    )
    height = round(plane.y1 + 52 + 14 * len(notes) + 12)

    def draw(sheet: Sheet) -> None:
        _draw_head(sheet, head)
        _draw_axes(sheet, plane, unit, 32.0 if limited else 15.0)
        if curves is not None:
            _draw_band(sheet, plane, curves)
        _draw_data(sheet, plane, picture)
        if curves is not None:
            _draw_curves(sheet, plane, curves)
            _draw_xmin(sheet, plane, picture.judgement, unit)
        _draw_limit(sheet, plane, picture.limit, unit)
        _draw_names(sheet, _placed(_entries(picture, plane, ends, curves), plane))
        for i, note in enumerate(notes):
            sheet.text(_EDGE, plane.y1 + 58 + 14 * i, note, MUTED, size=_SMALL)

    title = " ".join(head.verdict)
    told = " ".join(fit_sentences(picture.judgement, unit))
    return svg_sheet(WIDTH, height, draw, title=title, description=f"{_about(picture, curves)} {told}")


@dataclass(frozen=True, slots=True)
class _Head:
    verdict: list[str]
    more: list[str]


def _head(picture: TailPicture, unit: str) -> _Head:
    judgement = picture.judgement
    if judgement.alpha is None:
        return _Head(wrapped(no_tail_words(judgement), 102), [])
    more = [f"{p_words(judgement.gof)}."] if judgement.gof is not None else []
    if judgement.limit is not None:
        words = limit_words(judgement.limit, unit)
        more.append(f"{words[:1].upper()}{words[1:]}.")
    return _Head(wrapped(verdict_words(judgement, unit), 102), [line for words in more for line in wrapped(words, 132)])


def _draw_head(sheet: Sheet, head: _Head) -> None:
    y = _EDGE + 8
    for line in head.verdict:
        sheet.text(_EDGE, y, line, INK, size=_HEADLINE, bold=True)
        y += 20
    for line in head.more:
        sheet.text(_EDGE, y, line, MUTED, size=_PLAIN)
        y += 17


def _draw_axes(sheet: Sheet, plane: Plane, unit: str, above: float) -> None:
    for tick in share_ticks(plane):
        y = float(plane.y(np.array(tick.place)))
        sheet.line((plane.x0, plane.x1), (y, y), Stroke(HAIR), "grid")
        sheet.text(plane.x0 - 9, y + 4, tick.words, MUTED, size=_SMALL, anchor="right")
    sheet.line((plane.x0, plane.x1), (plane.y1, plane.y1), Stroke(PALE), "axis")
    for place in minor_ticks(plane):
        x = float(plane.x(np.array(place)))
        sheet.line((x, x), (plane.y1, plane.y1 + 3), Stroke(PALE, 0.7), "axis")
    free = -np.inf
    for tick in size_ticks(plane):
        x = float(plane.x(np.array(tick.place)))
        sheet.line((x, x), (plane.y1, plane.y1 + 6), Stroke(PALE), "axis")
        half = 3.2 * len(tick.words)
        if x - half > free:
            sheet.text(x, plane.y1 + 19, tick.words, MUTED, size=_SMALL, anchor="center")
            free = x + half + 6
    sheet.text(_EDGE, plane.y0 - above, "share of events at or above a size", MUTED, size=_SMALL)
    words = f"size in {unit}" if unit else "size"
    sheet.text(plane.x1, plane.y1 + 37, words, MUTED, size=_SMALL, anchor="right")


def _draw_band(sheet: Sheet, plane: Plane, curves: Curves) -> None:
    band = curves.band
    if band is not None:
        sheet.area(plane.x(band.log_size), plane.y(band.log_low), plane.y(band.log_high), BLUE, "band")


def _draw_data(sheet: Sheet, plane: Plane, picture: TailPicture) -> None:
    sample, xmin = picture.sample, picture.judgement.xmin
    seen = seen_points(sample, plane, xmin)
    x = plane.x(np.log10(sample.sizes[seen]))
    y = plane.y(np.log10(shares(sample)[seen]))
    in_tail = np.full(seen.size, True) if xmin is None else sample.sizes[seen] >= xmin
    sheet.dots(x[~in_tail], y[~in_tail], PALE, 3.2, "body")
    sheet.dots(x[in_tail], y[in_tail], INK, 3.6, "tail")


def _draw_curve(sheet: Sheet, plane: Plane, curve: Curve, stroke: Stroke, part: str) -> None:
    if curve.log_size.size > 1:
        sheet.line(plane.x(curve.log_size), plane.y(curve.log_share), stroke, part)


def _draw_curves(sheet: Sheet, plane: Plane, curves: Curves) -> None:
    for drawn in curves.rivals:
        _draw_curve(sheet, plane, drawn.curve, _RIVALS[drawn.rival.tail], "rival")
    _draw_curve(sheet, plane, curves.fit, _FIT, "fit")


def _draw_xmin(sheet: Sheet, plane: Plane, judgement: Judgement, unit: str) -> None:
    """A line from the start of the tail down to the axis: under the curve there is room for words."""
    assert judgement.xmin is not None
    assert judgement.n_tail is not None
    place = log10(judgement.xmin)
    x, y = float(plane.x(np.array(place))), float(plane.y(np.array(log10(judgement.n_tail / judgement.n))))
    sheet.line((x, x), (y, plane.y1), Stroke(MUTED, 0.8), "xmin")
    words = [f"xmin {size_with_unit(judgement.xmin, unit)}", _xmin_range(judgement)]
    share = judgement.n_tail / judgement.n
    words += ["tail: all events" if share == 1 else f"tail: {percent(share)} of the events"]
    words = [line for line in words if line]
    side: Anchor = "right" if x - plane.x0 > _LETTER * max(map(len, words)) + 12 else "left"
    width = _LETTER * max(map(len, words))
    veil = (x - 10 - width, x - 6) if side == "right" else (x + 6, x + 10 + width)
    sheet.blank(veil, (plane.y1 - _LINE * len(words) - 6, plane.y1 - 4), "veil")
    for i, line in enumerate(words):
        at = plane.y1 - _LINE * (len(words) - i) + 5
        sheet.text(x - 8 if side == "right" else x + 8, at, line, MUTED if i else INK, size=_SMALL, anchor=side)


def _xmin_range(judgement: Judgement) -> str:
    low, high = judgement.xmin_interval or (None, None)
    if judgement.xmin is None or low is None or high is None or low == high:
        return ""
    if judgement.counting == "whole":
        return f"95 %: {size_text(low)} to {size_text(high)}"
    return f"95 %: {bounds_text(judgement.xmin, (low, high))}"


def _limit_drawn(picture: TailPicture, ends: Ends) -> bool:
    return picture.limit is not None and ends.left <= log10(picture.limit) <= ends.right


def _draw_limit(sheet: Sheet, plane: Plane, limit: float | None, unit: str) -> None:
    if limit is None or not plane.holds(log10(limit)):
        return
    x = float(plane.x(np.array(log10(limit))))
    sheet.line((x, x), (plane.y0 - 5, plane.y1), Stroke(INK, 1.2), "limit")
    anchor: Anchor = "left" if x < plane.x0 + 70 else "right" if x > plane.x1 - 40 else "center"
    sheet.text(x, plane.y0 - 10, f"limit {size_with_unit(limit, unit)}", INK, size=_SMALL, anchor=anchor, bold=True)


def _entries(picture: TailPicture, plane: Plane, ends: Ends, curves: Curves | None) -> list[_Entry]:
    """What the column at the right names, from the top down.

    The data; the lines that end at the bottom, the steepest last; those that end at the right, each near its end.
    """
    judgement = picture.judgement
    events = [plural(judgement.n, "event")]
    if curves is None:
        return [_Entry("data", tuple(events), INK, None, plane.y0, False)]
    events += [f"{count_text(judgement.n_tail)} in the tail"] if judgement.n_tail else []
    body = judgement.n_tail != judgement.n
    data = _Entry("data", tuple(events), PALE if body else INK, None, plane.y0, False)
    drawn = [(curves.fit, _Entry("power law", _fit_lines(picture, curves), BLUE, _FIT, *_end(curves.fit, plane, ends)))]
    drawn += [(found.curve, _rival_entry(found, plane, ends)) for found in curves.rivals]
    down = sorted((pair for pair in drawn if not pair[1].joined), key=lambda pair: -pair[0].reach)
    across = sorted((entry for _, entry in drawn if entry.joined), key=lambda entry: entry.wanted)
    return [data, *(entry for _, entry in down), *across]


def _end(curve: Curve, plane: Plane, ends: Ends) -> tuple[float, bool]:
    """Where the name of a curve wants to stand, and whether the curve leads there."""
    return (float(plane.y(curve.log_share[-1])), True) if curve.leaves_right(ends) else (plane.y0, False)


def _rival_entry(drawn: RivalCurve, plane: Plane, ends: Ends) -> _Entry:
    stroke = _RIVALS[drawn.rival.tail]
    lines = (rival_verdict(drawn.rival),)
    return _Entry(drawn.rival.tail, lines, stroke.ink, stroke, *_end(drawn.curve, plane, ends))


def _fit_lines(picture: TailPicture, curves: Curves) -> tuple[str, ...]:
    judgement, draws = picture.judgement, picture.draws
    assert judgement.alpha is not None
    lines = [f"alpha {with_bounds(judgement.alpha, judgement.alpha_interval)}"]
    if curves.band is not None and draws is not None:
        source = "refits of the law" if draws.source == "model" else "refits of the data"
        lines.append(f"95 % band: {count_text(draws.alpha.size)} {source}")
    return tuple(lines)


def _placed(entries: list[_Entry], plane: Plane) -> list[tuple[_Entry, float]]:
    """The entries with their heights: as near to what they want as their neighbours and the plane allow."""
    tops: list[float] = []
    free = plane.y0 - 8
    for entry in entries:
        tops.append(max(free, entry.wanted - 8))
        free = tops[-1] + entry.height
    ceiling = plane.y1 + 32
    for i in range(len(entries) - 1, -1, -1):
        tops[i] = min(tops[i], ceiling - entries[i].height)
        ceiling = tops[i]
    return list(zip(entries, tops, strict=True))


def _draw_names(sheet: Sheet, placed: list[tuple[_Entry, float]]) -> None:
    for entry, top in placed:
        middle = top + 8
        if entry.stroke is None:
            sheet.dots(np.array([_COLUMN + 15]), np.array([middle]), entry.ink, 3.2, "sample")
            sheet.dots(np.array([_COLUMN + 23]), np.array([middle]), INK, 3.6, "sample")
        else:
            sheet.line((_COLUMN + 6, _COLUMN + _SAMPLE + 6), (middle, middle), entry.stroke, "sample")
            if entry.joined:
                lead = Stroke(entry.ink, 0.7)
                sheet.line((_RIGHT + 2, _COLUMN - 2, _COLUMN + 4), (entry.wanted, middle, middle), lead, "lead")
        x = _COLUMN + _SAMPLE + 14
        sheet.text(x, middle + 4, entry.name, entry.ink if entry.stroke else INK, size=_PLAIN, bold=True)
        for i, line in enumerate(entry.lines):
            sheet.text(x, middle + 4 + _LINE * (i + 1), line, MUTED, size=_SMALL)


def _notes(picture: TailPicture, ends: Ends, unit: str, curves: Curves | None) -> list[str]:
    """Under the picture: what is not in it, and the caution."""
    judgement, sample = picture.judgement, picture.sample
    notes = []
    outside = int(sample.counts[np.log10(np.maximum(sample.sizes, 1e-320)) < ends.left].sum()) if sample.n else 0
    if outside:
        notes.append(f"{plural(outside, 'smaller event')} lie further left.")
    if picture.limit is not None and not _limit_drawn(picture, ends):
        notes.append(f"The limit of {size_with_unit(picture.limit, unit)} lies outside the picture.")
    undetermined = [rival.tail for rival in judgement.rivals if rival.favours == "not determined"]
    if undetermined:
        notes.append(f"Not determined, so not drawn: {', '.join(undetermined)}.")
    if any(not is_drawn(rival) and rival.favours != "not determined" for rival in judgement.rivals):
        notes.append("The data show no cut-off.")
    lines = wrapped(" ".join(notes), 150)
    return [*lines, *(wrapped(CAUTION, 150) if curves is not None else [])]


def _about(picture: TailPicture, curves: Curves | None) -> str:
    """What a reader who does not see the picture would see in it."""
    parts = ["the data as dots"]
    if curves is not None:
        parts.append("the fitted power law as a solid line" + (" in its 95 % band" if curves.band else ""))
        parts += [f"the {drawn.rival.tail} as a broken line" for drawn in curves.rivals]
    if picture.limit is not None:
        parts.append("the limit as an upright line")
    return f"Share of events at or above each size, both axes logarithmic: {', '.join(parts)}."
