"""Drawings stay in their room, show the data where it is, and letters tell each refit's result."""

from __future__ import annotations

import numpy as np
from hypothesis import given, settings
from hypothesis import strategies as st

from monitor.render.charts import LEFT, TailDrawing, chart_legend, refit_letter, refit_strip, tail_chart
from monitor.render.planned import survival
from monitor.render.safe import width_of
from monitor.render.seen import decode_refit
from monitor.tail.tails import Tails
from tests.stores import HEAVIER, LIGHTER, MISFIT, NOW, gof, judged, refit


def tails(alpha: float, xmin: float, share: float, counting: str = "measured") -> Tails:
    return Tails(np.array([alpha]), np.array([xmin]), np.array([share]), counting)  # type: ignore[arg-type]


def drawing(sizes: list[float], **changes: object) -> TailDrawing:
    distinct, counts = np.unique(np.array(sizes), return_counts=True)
    given_: dict[str, object] = {"unit": "units", "fit": None, "baseline": None, "limit": None, **changes}
    return TailDrawing(sizes=distinct, counts=counts.astype(np.int64), **given_)  # type: ignore[arg-type]


@settings(max_examples=80, deadline=None)
@given(
    st.lists(st.floats(1e-300, 1e300), min_size=1, max_size=200),
    st.integers(1, 240),
    st.integers(1, 60),
    st.booleans(),
    st.none() | st.floats(1e-3, 1e9),
)
def test_a_drawing_has_its_height_and_is_no_wider(
    sizes: list[float], width: int, height: int, ascii_only: bool, limit: float | None
) -> None:
    shown = drawing(sizes, limit=limit, fit=tails(2.5, sizes[0], 0.5), baseline=tails(1.2, 10.0, 0.1))
    lines = tail_chart(shown, width, height, ascii_only=ascii_only)
    assert len(lines) in (0, height)
    assert all(width_of(line) <= width for line in lines)
    assert not ascii_only or all(line.isascii() for line in lines)


def test_the_share_of_the_data_stands_in_its_row() -> None:
    # Of 1000 sizes 990 are 1, nine are 100, one is 10 000: shares 1, 1 in 100, 1 in 1000.
    lines = tail_chart(drawing([1.0] * 990 + [100.0] * 9 + [10_000.0]), 80, 22, ascii_only=True)
    labelled = {line[:LEFT].strip(): line[LEFT:] for line in lines[:-2] if line[:LEFT].strip()}
    assert set(labelled) == {"all", "1 in 10", "1 in 100", "1 in 1 000"}
    assert "#" in labelled["all"]
    assert "##########" in labelled["1 in 100"]
    assert "##########" in labelled["1 in 1 000"]
    assert labelled["1 in 10"].strip() in ("", "#")  # passed only by an upright step


def test_a_fit_that_follows_the_data_is_hidden_by_it_and_a_wrong_one_is_seen() -> None:
    sizes = list(100 * (1 - (np.arange(20_000) + 0.5) / 20_000) ** (-1 / 1.5))
    right = tail_chart(drawing(sizes, fit=tails(2.5, 100.0, 1.0)), 80, 20, ascii_only=True)
    wrong = tail_chart(drawing(sizes, fit=tails(1.7, 100.0, 1.0)), 80, 20, ascii_only=True)
    assert sum(line[LEFT:].count("+") for line in right[:-2]) <= 3
    assert sum(line[LEFT:].count("+") for line in wrong[:-2]) > 20


def test_legend_names_only_what_is_drawn() -> None:
    assert chart_legend(drawing([1.0]), ascii_only=True) == "Share of events at or above a size: # data"
    full = chart_legend(drawing([1.0], fit=tails(2, 1, 1), baseline=tails(2, 1, 1), limit=5.0), ascii_only=False)
    assert full == "Share of events at or above a size: dots data, + fit, b baseline, | limit"
    assert len(full) <= 80


def test_survival_of_measured_and_whole_sizes() -> None:
    # Pareto in closed form: P(X >= x) = share (x / xmin)^(1 - alpha).
    found = survival(tails(2.5, 100.0, 0.4), np.array([50.0, 100.0, 400.0]))
    assert np.isnan(found[0])
    np.testing.assert_allclose(found[1:], [0.4, 0.4 / 8])
    # Whole sizes from 1 on with alpha 2: P(X >= 2) = 1 - 6/pi^2, since zeta(2) = pi^2/6 (Euler).
    whole = survival(tails(2.0, 1.0, 1.0, "whole"), np.array([1.0, 1.5, 2.0]))
    np.testing.assert_allclose(whole, [1.0, 1 - 6 / np.pi**2, 1 - 6 / np.pi**2])


def test_each_result_has_its_letter_and_the_newest_stands_right() -> None:
    good = judged(2.5, 0.06, gof(0.5, 0.4, 0.6))
    none = judged(2.5, 0.06, gof(0.5, 0.4, 0.6))
    stored = [
        refit("d", NOW, None, state="skipped", reason="the daemon lags"),
        refit("d", NOW, None, state="failed", reason="timed out"),
        refit("d", NOW, type(none)(n=3, counting="measured", resolution="exact", reason="too few")),
        refit("d", NOW, good),
        refit("d", NOW, good, flags=MISFIT),
        refit("d", NOW, good, flags=LIGHTER),
        refit("d", NOW, good, flags=(*HEAVIER, *MISFIT)),
    ]
    decoded = [decode_refit(one) for one in stored]
    assert [refit_letter(one) for one in decoded] == list("-x.=MLH")
    assert refit_strip(decoded, 3) == "MLH"
    assert refit_strip(decoded, 0) == ""
