"""One sheet of SVG: lines, areas, dots and text by pixels, readable in light and dark, equal bytes for equal input.

matplotlib writes the SVG, without pyplot and without its axes; its settings hold while a sheet is written and are put
back. Text stays text in the reader's own sans-serif. Sheets are not to be written by several threads at once.
"""

from __future__ import annotations

import re
import warnings
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from html import escape
from io import StringIO
from typing import Any, Literal

import matplotlib.style
import numpy as np
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure
from matplotlib.lines import Line2D
from matplotlib.patches import PathPatch, Polygon
from matplotlib.path import Path
from matplotlib.text import Text
from matplotlib.transforms import Affine2D
from numpy.typing import NDArray

from monitor.render.safe import plain

Floats = NDArray[np.float64]
Anchor = Literal["left", "center", "right"]

_MEASURED_BY = "DejaVu Sans"
"""matplotlib's own face, the same on every machine: for measuring only, readers see the generic one."""
_SHOWN_IN = "system-ui, sans-serif"
_SETTINGS = {"svg.fonttype": "none", "svg.hashsalt": "tailgauge", "font.family": [_MEASURED_BY], "path.simplify": False}
_NO_METADATA = {"Date": None, "Creator": None, "Format": None, "Type": None}
_TAG = re.compile(r"<[^>]*>")
_NUMBERED = re.compile(r' id="(?:figure|patch|line2d|text)_\d+"| transform="rotate\(-0 [^"]*"')


@dataclass(frozen=True, slots=True)
class Ink:
    """A colour on white paper and its fellow in the dark. Each light colour belongs to one Ink only."""

    light: str
    dark: str


# Contrast to the paper is at least 4.5 for every ink that text is set in; the hues differ for every kind of colour
# vision in lightness or in the blue-yellow direction, and no line is told apart by its hue alone.
PAPER = Ink("#ffffff", "#14181d")
INK = Ink("#1f262d", "#e6eaee")
MUTED = Ink("#5a6670", "#a0abb5")
PALE = Ink("#8d98a2", "#75808a")
HAIR = Ink("#e4e8eb", "#2a3138")
BLUE = Ink("#0a5aa6", "#6db3f2")
RUST = Ink("#b34a0f", "#f0a06a")
VIOLET = Ink("#7a3e9d", "#c9a0e6")
TEAL = Ink("#00756a", "#5cc9b8")
OCHRE = Ink("#7d6100", "#d9bc4f")
INKS = (PAPER, INK, MUTED, PALE, HAIR, BLUE, RUST, VIOLET, TEAL, OCHRE)


@dataclass(frozen=True, slots=True)
class Stroke:
    """How a line is drawn: its colour, its width in pixels, and the lengths of dashes and gaps, () for none."""

    ink: Ink
    width: float = 1.0
    dashes: tuple[float, ...] = ()


class Sheet:
    """What a drawing is put on: pixels from the upper left corner. `part` names the group, class="part" in the SVG."""

    def __init__(self, figure: Any, height: float) -> None:
        self._figure = figure
        self._place = Affine2D().scale(1, -1).translate(0, height)
        self._added = 0

    def line(self, x: Floats | Sequence[float], y: Floats | Sequence[float], stroke: Stroke, part: str) -> None:
        """A line through the points."""
        style = (0, stroke.dashes) if stroke.dashes else "-"
        look: dict[str, Any] = {"color": stroke.ink.light, "linewidth": stroke.width, "linestyle": style, "gid": part}
        look |= {"dash_capstyle": "butt", "solid_capstyle": "butt", "dash_joinstyle": "round"}
        self._add(Line2D(_tidy(x), _tidy(y), **look))

    def area(self, x: Floats, low: Floats, high: Floats, ink: Ink, part: str) -> None:
        """The area between two lines over the same x, thinly washed."""
        corners = np.column_stack((np.concatenate((x, x[::-1])), np.concatenate((low, high[::-1]))))
        self._add(Polygon(_tidy(corners), facecolor=ink.light, edgecolor="none", alpha=0.16, gid=part))

    def blank(self, x: tuple[float, float], y: tuple[float, float], part: str) -> None:
        """A veil of paper between these ends, for words that are to stand on what was drawn."""
        corners = _tidy(np.array([(x[0], y[0]), (x[1], y[0]), (x[1], y[1]), (x[0], y[1])]))
        self._add(Polygon(corners, facecolor=PAPER.light, edgecolor="none", alpha=0.85, gid=part))

    def dots(self, x: Floats, y: Floats, ink: Ink, size: float, part: str) -> None:
        """Round dots of `size` pixels across, as one path."""
        if not len(x):
            return
        # Lines too short to be seen with round ends: a fifth of the bytes of a mark for each dot.
        ends = np.column_stack((x, y, x + 0.01, y)).reshape(-1, 2)
        codes = np.tile(np.array([Path.MOVETO, Path.LINETO], np.uint8), len(x))
        look: dict[str, Any] = {
            "edgecolor": ink.light,
            "linewidth": size,
            "capstyle": "round",
            "facecolor": "none",
            "gid": part,
        }
        self._add(PathPatch(Path(_tidy(ends), codes), **look))

    def text(
        self,
        x: float,
        y: float,
        words: str,
        ink: Ink,
        *,
        size: float = 11.0,
        anchor: Anchor = "left",
        bold: bool = False,
    ) -> None:
        """One line of text, made harmless, its baseline at y."""
        look: dict[str, Any] = {"color": ink.light, "fontsize": size, "fontweight": "bold" if bold else "normal"}
        self._add(Text(x, y, plain(words), ha=anchor, va="baseline", parse_math=False, **look))

    def _add(self, artist: Any) -> None:
        self._added += 1
        artist.set(transform=self._place, zorder=self._added)  # what comes later lies on top, whatever it is
        self._figure.add_artist(artist)


def _tidy(values: Floats | Sequence[float]) -> Floats:
    """A hundredth of a pixel is more than anybody sees."""
    return np.round(np.asarray(values, float), 2)


def svg_sheet(width: int, height: int, draw: Callable[[Sheet], None], *, title: str, description: str) -> str:
    """The SVG document of what `draw` puts on a sheet of so many pixels.

    Parameters: title and description, of any text, for readers who do not see it. The root is
    <svg class="sheet" role="img">; equal input gives equal bytes (with the same matplotlib).
    """
    out = StringIO()
    with warnings.catch_warnings(), matplotlib.style.context(["default", _SETTINGS]):
        # A unit in letters that the measuring face lacks is no trouble: readers have their own faces.
        warnings.simplefilter("ignore")
        figure = Figure(figsize=(width / 72, height / 72), dpi=72, facecolor=PAPER.light)
        canvas = FigureCanvasSVG(figure)
        draw(Sheet(figure, height))
        canvas.print_svg(out, metadata=_NO_METADATA)
    body = _TAG.sub(_own_words, out.getvalue())
    start = body.index(">", body.index("<svg")) + 1
    # matplotlib's rule for joins must not reach the page that a sheet is set into.
    drawn = body[start:].lstrip().replace('<style type="text/css">*{', "<style>.sheet *{", 1)
    return _head(width, height, title, description) + drawn


def _own_words(found: re.Match[str]) -> str:
    """A tag with generic fonts, and with a class for its part instead of a number that other sheets would repeat."""
    tag = found[0].replace(f"'{_MEASURED_BY}'", _SHOWN_IN)
    return _NUMBERED.sub("", tag).replace("<g id=", "<g class=")


def _head(width: int, height: int, title: str, description: str) -> str:
    names = 'xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink"'
    return (
        '<?xml version="1.0" encoding="utf-8"?>\n'
        f'<svg {names} class="sheet" role="img" width="{width}" height="{height}" viewBox="0 0 {width} {height}">\n'
        f" <title>{escape(plain(title), quote=False)}</title>\n"
        f" <desc>{escape(plain(description), quote=False)}</desc>\n"
        f" <style>{_dark()}</style>\n "
    )


def _dark() -> str:
    """Rules that exchange every ink where the reader's screen is dark."""
    rules = []
    for ink in INKS:
        for kind in ("fill", "stroke"):
            rules.append(f'.sheet [style*="{kind}: {ink.light}"] {{{kind}: {ink.dark} !important}}')
    return "@media (prefers-color-scheme: dark) {\n  " + "\n  ".join(rules) + "\n }"
