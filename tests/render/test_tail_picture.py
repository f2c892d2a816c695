"""The picture of a tail: well-formed, told in words, equal for equal input, and exact where figures become pixels."""

from __future__ import annotations

import re
import sys
import threading
from xml.etree import ElementTree as ET

import msgspec
import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.render.numbers import count_text, with_bounds
from monitor.render.safe import plain, shorten
from monitor.render.svg import INKS, PALE, PAPER
from monitor.render.tail_curves import curves_of, is_drawn
from monitor.render.tail_picture import TailPicture, tail_picture
from monitor.render.tail_plane import Plane, ends_of, seen_points, shares, size_ticks
from monitor.render.words import fit_sentences, verdict_words
from monitor.tail.judge import judge_with_draws
from monitor.tail.judgement import Judgement, Options
from monitor.tail.sample import Sample
from storage.grid import cell_of

SVG = "{http://www.w3.org/2000/svg}"


def sample_of(n=2000, seed=5):
    rng = np.random.default_rng(seed)
    return Sample.of_sizes(
        np.concatenate((rng.uniform(1, 10, 3 * n // 4), 10 * (1 - rng.random(n // 4)) ** (-1 / 1.5)))
    )


def picture_of(sample, unit="units", limit=None, **asked):
    found = judge_with_draws(sample, Options(limit=limit, **{"replicates": 120, **asked}))
    return TailPicture(sample=sample, judgement=found.judgement, unit=unit, draws=found.draws, limit=limit)


@pytest.fixture(scope="module")
def picture():
    return picture_of(sample_of(), limit=3000.0, events_per_day=50.0, period_days=30.0)


def words(svg):
    return [element.text or "" for element in ET.fromstring(svg).iter(f"{SVG}text")]


def part(svg, name):
    return [group for group in ET.fromstring(svg).iter(f"{SVG}g") if group.get("class") == name]


def points(svg, name):
    """The vertices of a part, float64 (k, 2), in pixels."""
    paths = " ".join(path.get("d") for group in part(svg, name) for path in group.iter(f"{SVG}path"))
    return np.array([[float(x), float(y)] for x, y in re.findall(r"[ML] (\S+) (\S+)", paths)])


def plane_of(svg, picture):
    """The plane, found again from the drawn axis and grid."""
    ends = ends_of(picture.sample, picture.judgement, picture.limit)
    grid, axis = points(svg, "grid"), points(svg, "axis")
    return Plane(
        left=ends.left, right=ends.right, bottom=ends.bottom,
        x0=grid[:, 0].min(), x1=grid[:, 0].max(), y0=grid[:, 1].min(), y1=axis[:, 1].min(),
    )  # fmt: skip


def test_it_is_svg_with_title_and_description(picture):
    root = ET.fromstring(tail_picture(picture))
    assert root.tag == f"{SVG}svg"
    assert root.get("role") == "img"
    assert [child.tag for child in root][:2] == [f"{SVG}title", f"{SVG}desc"]
    assert root[0].text == verdict_words(picture.judgement, "units")
    for sentence in fit_sentences(picture.judgement, "units"):
        assert sentence in root[1].text


def test_the_figures_of_the_judgement_stand_in_it(picture):
    judgement, shown = picture.judgement, words(tail_picture(picture))
    assert f"alpha {with_bounds(judgement.alpha, judgement.alpha_interval)}" in shown
    assert f"{count_text(judgement.n_tail)} in the tail" in shown
    assert "2 000 events" in shown
    assert "size in units" in shown
    assert "limit 3 000 units" in shown
    assert any(line.startswith("Limit 3 000 units: expected") for line in shown)
    assert any(line.startswith("xmin ") and line.endswith(" units") for line in shown)
    drawn = [rival.tail for rival in judgement.rivals if is_drawn(rival)]
    assert "exponential" in drawn
    assert set(drawn) <= set(shown)
    assert f"95 % band: {picture.draws.alpha.size} refits of the law" in shown


def test_data_and_fit_stand_where_their_figures_say(picture):
    svg, judgement, sample = tail_picture(picture), picture.judgement, picture.sample
    plane = plane_of(svg, picture)
    dots = points(svg, "tail")[::2]
    first, last = np.searchsorted(sample.sizes, judgement.xmin), -1
    share = shares(sample)
    for index, dot in ((first, dots[0]), (last, dots[-1])):
        expected = plane.x(np.log10(sample.sizes[index])), plane.y(np.log10(share[index]))
        assert dot == pytest.approx(expected, abs=0.02)
    fit = points(svg, "fit")
    start = plane.x(np.log10(judgement.xmin)), plane.y(np.log10(judgement.n_tail / judgement.n))
    assert fit[0] == pytest.approx(start, abs=0.02)
    assert dots[0] == pytest.approx(start, abs=0.02)
    # On logarithmic axes the survival function falls with alpha - 1.
    run, rise = fit[-1] - fit[0]
    decades_right = run / (plane.x1 - plane.x0) * (plane.right - plane.left)
    decades_down = rise / (plane.y1 - plane.y0) * plane.bottom
    assert -decades_down / decades_right == pytest.approx(judgement.alpha - 1, rel=2e-3)
    assert points(svg, "limit")[:, 0] == pytest.approx(plane.x(np.log10(3000.0)), abs=0.02)
    assert points(svg, "xmin")[:, 0] == pytest.approx(start[0], abs=0.02)


def test_the_band_holds_the_fit(picture):
    ends = ends_of(picture.sample, picture.judgement, picture.limit)
    curves = curves_of(picture.sample, picture.judgement, picture.draws, ends)
    fit = np.interp(curves.band.log_size, curves.fit.log_size, curves.fit.log_share)
    assert (curves.band.log_low <= fit + 1e-9).all()
    assert (fit <= curves.band.log_high + 1e-9).all()


@pytest.fixture(scope="module")
def bent():
    """A lognormal sample: all four rivals are determined."""
    found = picture_of(Sample.of_sizes(np.exp(np.random.default_rng(8).normal(3, 1.2, 4000))), xmin=20.0)
    assert sum(map(is_drawn, found.judgement.rivals)) == 4
    return found


def test_rivals_start_where_the_fit_starts(bent):
    svg = tail_picture(bent)
    begins = [found for found in part(svg, "rival") for found in re.findall(r"M (\S+) (\S+)", found[0].get("d"))]
    assert len(begins) == 4
    for begin in begins:
        assert [float(end) for end in begin] == pytest.approx(points(svg, "fit")[0], abs=0.02)


def test_nothing_is_told_by_colour_alone(bent):
    """Every line that is drawn has dashes of its own, and a sample of them beside its name."""
    svg = tail_picture(bent)
    dashes = [
        re.search(r"stroke-dasharray: ([^;]+)", path.get("style"))
        for name in ("fit", "rival")
        for group in part(svg, name)
        for path in group.iter(f"{SVG}path")
    ]
    kinds = [found[1] if found else "solid" for found in dashes]
    assert len(set(kinds)) == len(kinds) == 5
    samples = ET.tostring(ET.fromstring(svg), encoding="unicode")
    assert all(kind == "solid" or samples.count(kind) >= 2 for kind in kinds)


def contrast(one, other):
    """Contrast of two colours, 1 to 21, by the formula of WCAG 2.1, section 1.4.3."""

    def luminance(colour):
        parts = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
        linear = [part / 12.92 if part <= 0.04045 else ((part + 0.055) / 1.055) ** 2.4 for part in parts]
        return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]

    high, low = sorted((luminance(one), luminance(other)), reverse=True)
    return (high + 0.05) / (low + 0.05)


def test_text_is_readable_in_light_and_dark(picture):
    svg = tail_picture(picture)
    inks = {ink.light: ink for ink in INKS}
    used = {re.search(r"fill: (#\w{6})", text.get("style"))[1] for text in ET.fromstring(svg).iter(f"{SVG}text")}
    assert len(used) >= 4
    for colour in used:  # 4.5 is what WCAG asks for
        assert contrast(colour, PAPER.light) >= 4.5
        assert contrast(inks[colour].dark, PAPER.dark) >= 4.5
        assert f'[style*="fill: {colour}"] {{fill: {inks[colour].dark} !important}}' in svg
    # Dots and axis carry meaning but no text: 3 is what WCAG 1.4.11 asks for, rounded down by a hair for the pale body.
    assert min(contrast(PALE.light, PAPER.light), contrast(PALE.dark, PAPER.dark)) >= 2.9


def test_equal_input_gives_equal_bytes(picture):
    first = tail_picture(picture)
    assert tail_picture(picture) == first
    found: list[str] = []
    thread = threading.Thread(target=lambda: found.append(tail_picture(picture)))
    thread.start()
    thread.join()
    assert found == [first]
    assert not re.search(r"<dc:date|\b20\d\d-\d\d-\d\d", first)
    assert "matplotlib.pyplot" not in sys.modules


def test_the_readers_own_settings_change_nothing(picture):
    import matplotlib

    first = tail_picture(picture)
    with matplotlib.rc_context(
        {"lines.linewidth": 9, "text.color": "red", "svg.fonttype": "path", "text.usetex": True}
    ):
        assert tail_picture(picture) == first
        assert matplotlib.rcParams["svg.fonttype"] == "path"


def test_text_stays_text_in_generic_fonts(picture):
    svg = tail_picture(picture)
    families = set(re.findall(r"font-family: ([^;\"]+)", svg))
    assert families == {"system-ui, sans-serif"}


@pytest.mark.parametrize(
    "unit",
    [
        "</text><script>alert(1)</script>",
        '"><svg onload="x">&amp;',
        "$\\frac{1}{2}$ $x_",
        "$x^2$",
        "]]>\x00\x1b[31m\u202e\ud800\ufffe",
        "箱 📦 Stück",
        "x" * 500,
        "' style=\"fill: #1f262d\" 'DejaVu Sans'",
    ],
)
def test_a_hostile_unit_stays_text(unit):
    svg = tail_picture(picture_of(sample_of(200), unit=unit, replicates=0, limit=50.0))
    root = ET.fromstring(svg)
    assert not [element for element in root.iter() if element.tag.endswith("script")]
    assert [element.tag for element in root.iter()].count(f"{SVG}svg") == 1
    assert all(len(text) < 200 for text in words(svg))
    assert f"size in {plain(shorten(unit, 24))}" in words(svg)  # as it is written, no markup of any kind
    svg.encode()


def test_a_sample_without_a_tail_draws_its_data_and_says_why():
    picture = picture_of(Sample.of_sizes(np.array([1.0, 2.0, 2.0, 3.0])))
    svg = tail_picture(picture)
    assert len(points(svg, "tail")) == 2 * 3
    assert not part(svg, "fit")
    assert not part(svg, "xmin")
    assert "fewer than the 10" in " ".join(words(svg))


@pytest.mark.parametrize(
    "sizes",
    [
        [],
        [5.0],
        [5.0] * 50,
        [1.0, 1.0 + 1e-12] * 20,
        list(100 + np.linspace(0, 1, 40) ** 3),
        list(np.geomspace(1e-300, 1e300, 60)),
        [5e-324, 1e-310, 1.0, 1.7e308] * 10,
        list(np.arange(1.0, 60.0)),
    ],
)
@pytest.mark.parametrize("limit", [None, 4.0, 1e-300, 1e300])
def test_odd_samples_are_drawn(sizes, limit):
    sample = Sample.of_sizes(np.array(sizes, float))
    assert_drawn(tail_picture(picture_of(sample, limit=limit, replicates=60)))


def test_sizes_of_zero_or_less_are_no_trouble():
    sample = Sample(np.array([-3.0, 0.0, 1.0, 2.0]), np.array([1, 2, 3, 4]))
    assert_drawn(tail_picture(TailPicture(sample=sample, judgement=judged_nothing(sample), unit="")))


def judged_nothing(sample):
    return Judgement(n=sample.n, counting="measured", resolution="exact", reason="sizes must be above zero")


def assert_drawn(svg):
    root = ET.fromstring(svg)
    for element in root.iter():
        told = f"{element.get('d', '')} {element.get('x', '')} {element.get('y', '')} {element.text or ''}"
        assert not re.search(r"\b(nan|inf|none)\b", told, re.IGNORECASE)
    width, height = (float(root.get(name)) for name in ("width", "height"))
    for name in ("tail", "body", "fit", "rival", "band", "xmin", "limit", "axis", "lead"):
        found = points(svg, name)
        assert len(found) <= 6000
        if len(found):
            assert (found >= 0).all()
            assert (found <= (width, height)).all()


@settings(max_examples=60, deadline=None)
@given(
    sizes=st.lists(st.floats(1e-6, 1e9), min_size=1, max_size=60).map(sorted),
    alpha=st.one_of(st.none(), st.floats(1.0001, 80)),
    start=st.integers(0, 59),
    whole=st.booleans(),
    limit=st.one_of(st.none(), st.floats(1e-9, 1e12)),
)
def test_any_judgement_is_drawn(sizes, alpha, start, whole, limit):
    sample = Sample.of_sizes(np.ceil(sizes) if whole else np.array(sizes))
    judgement = judged_nothing(sample)
    if alpha is not None:
        start = min(start, sample.sizes.size - 1)
        judgement = Judgement(
            n=sample.n, counting="whole" if whole else "measured", resolution="exact", alpha=alpha,
            xmin=float(sample.sizes[start]), n_tail=int(sample.counts[start:].sum()),
        )  # fmt: skip
    assert_drawn(tail_picture(TailPicture(sample=sample, judgement=judgement, unit="kg", limit=limit)))


@pytest.mark.parametrize("counting", ["measured", "whole"])
def test_a_sample_on_the_grid_is_drawn(counting):
    rng = np.random.default_rng(2)
    cells, counts = np.unique(cell_of(np.ceil(100 * (1 - rng.random(4000)) ** (-1 / 1.4))), return_counts=True)
    svg = tail_picture(picture_of(Sample.of_cells(cells, counts), counting=counting))
    assert_drawn(svg)
    assert part(svg, "fit")


def test_a_million_events_take_two_thousand_dots_without_a_gap():
    rng = np.random.default_rng(3)
    sample = Sample.of_sizes((1 - rng.random(1_000_000)) ** (-1 / 1.5))
    plane = Plane(left=-0.1, right=4.2, bottom=-6.3, x0=112, x1=648, y0=100, y1=500)
    seen = seen_points(sample, plane)
    assert seen[0] == 0
    assert seen[-1] == sample.sizes.size - 1
    assert len(seen) <= 2000
    x, y = plane.x(np.log10(sample.sizes)), plane.y(np.log10(shares(sample)))
    # Every point left out lies within a square of 0.6 pixels of one that is drawn: less than a dot's radius.
    before = seen[np.searchsorted(seen, np.arange(sample.sizes.size), "right") - 1]
    assert np.abs(x - x[before]).max() <= 0.6
    assert np.abs(y - y[before]).max() <= 0.6


@given(left=st.floats(-300, 300), span=st.one_of(st.floats(0.01, 1), st.floats(1, 600)))
def test_sizes_are_told_at_few_places_and_never_none(left, span):
    ticks = size_ticks(Plane(left=left, right=min(left + span, 307.0), bottom=-3, x0=0, x1=500, y0=0, y1=400))
    assert 1 <= len(ticks) <= 14
    for tick in ticks:
        assert float(tick.words.replace(" ", "")) == pytest.approx(10**tick.place, rel=1e-6)
    assert len({tick.words for tick in ticks}) == len(ticks)


def test_what_was_not_determined_is_said_and_not_drawn(picture):
    rivals = tuple(
        msgspec.structs.replace(
            rival, log_likelihood_ratio=None, z=None, p=None, favours="not determined", parameters={}
        )
        for rival in picture.judgement.rivals
    )
    judgement = msgspec.structs.replace(picture.judgement, rivals=rivals)
    svg = tail_picture(TailPicture(sample=picture.sample, judgement=judgement, unit="units"))
    assert not part(svg, "rival")
    assert not part(svg, "band")
    assert any(line.startswith("Not determined, so not drawn: lognormal, exponential") for line in words(svg))
