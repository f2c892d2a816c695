"""Has the tail changed? Exact tests of two windows, or of one window against a plan, above a common xmin.

The windows must share no event: two windows that half overlap make a test of level .05 one of level .007.
Measured sizes: 2 n (alpha - 1) mean ln(x / xmin) is chi-square with 2n degrees of freedom, hence the ratio of two
means of logs is F(2 n1, 2 n2) (Johnson, Kotz & Balakrishnan, Continuous Univariate Distributions 1, chapter 20).
On the grid y = (cell - first cell + 1/2) width takes the place of the log. Whole sizes: likelihood ratio,
chi-square with 1 degree of freedom.
"""

from __future__ import annotations

from math import expm1, log1p
from typing import Literal

import msgspec
import numpy as np
from scipy.special import chdtr, chdtrc, fdtr, fdtrc

from monitor.tail.base_measure import Nodes, TailData, reach_of, summed, support, tail_data
from monitor.tail.judgement import Counting
from monitor.tail.proportions import two_shares_p
from monitor.tail.rival_fit import LawFit, fit_law, log_terms_at
from monitor.tail.rival_laws import POWER_LAW
from monitor.tail.sample import Sample
from storage.grid import CELL_WIDTH, cell_of


class Comparison(msgspec.Struct, frozen=True, kw_only=True):
    """The tail of a later window against an earlier one, or against a plan.

    xmin            the common lower end
    n_earlier       events at or above xmin in the earlier window; None for a plan, which is taken as exact
    n_later         the same in the later window
    alpha_earlier   exponent of the earlier window (the plan's); None when it cannot be had
    alpha_later     exponent of the later window at this xmin
    ratio           (alpha_later - 1) / (alpha_earlier - 1): below 1 the later tail is heavier
    p               two-sided p of "the exponents are equal"; None when nothing can be tested
    direction       which way the estimate lies, whatever its p; None without an estimate
    method          the test in words, or why there is none
    share_earlier   share of all events at or above xmin, earlier; None for a plan
    share_later     the same, later
    share_p         two-sided p of "the shares are equal"
    """

    xmin: float
    n_earlier: int | None
    n_later: int
    alpha_earlier: float | None
    alpha_later: float | None
    ratio: float | None
    p: float | None
    direction: Literal["heavier", "lighter"] | None
    method: str
    share_earlier: float | None = None
    share_later: float | None = None
    share_p: float | None = None


class _Side(msgspec.Struct, frozen=True, kw_only=True):
    """One side of the comparison: its tail as data, its counts, and the mean of its logs."""

    data: TailData | None
    n_tail: int
    n: int
    mean_y: float
    on_grid: bool


def compare_windows(earlier: Sample, later: Sample, *, xmin: float, counting: Counting) -> Comparison:
    """The later window's tail against the earlier one's, both above `xmin`.

    xmin is best the baseline's, else the larger of the two; when either window is on the grid both are
    rounded to it and an exceedance is a size in xmin's cell or above.
    """
    xmin = float(xmin)
    if (earlier.cells is None) != (later.cells is None):
        earlier, later = _on_grid(earlier), _on_grid(later)
    return _compared(_side(earlier, xmin, counting), _side(later, xmin, counting), xmin, counting)


def compare_with_fit(
    later: Sample, *, xmin: float, alpha: float, n_tail: int, n: int, counting: Counting
) -> Comparison:
    """The same as compare_windows when of the earlier window only its fit at this xmin is known.

    Parameters: alpha, its maximum-likelihood exponent at xmin; n_tail, events at or above xmin out of n. The
    exponent holds all that the earlier sizes say about it (it is sufficient), so nothing is lost.
    """
    xmin, slope = float(xmin), float(alpha) - 1
    if counting == "whole":
        single = TailData(Nodes(np.array([1.0]), np.zeros(1)), None, np.array([1.0]), xmin)
        nodes = support("whole", xmin, reach_of(single, slope), first=min(1.0, 2 / slope))
        share = np.exp(nodes.log_weight - slope * nodes.y)
        mean_y = summed(share, nodes.y) / float(share.sum())
    elif later.cells is not None:
        mean_y = (1 / expm1(slope * CELL_WIDTH) + 0.5) * CELL_WIDTH
    else:
        mean_y = 1 / slope
    one_point = Nodes(np.array([mean_y]), np.zeros(1))
    data = TailData(one_point, None, np.array([float(n_tail)]), xmin)
    side = _Side(data=data, n_tail=n_tail, n=n, mean_y=mean_y, on_grid=later.cells is not None)
    return _compared(side, _side(later, xmin, counting), xmin, counting)


def compare_with_plan(later: Sample, *, xmin: float, alpha: float, counting: Counting) -> Comparison:
    """The later window's tail against a planned exponent, taken as known without error.

    Measured sizes: exact chi-square test; whole sizes: likelihood ratio against the planned exponent.
    """
    xmin, alpha = float(xmin), float(alpha)
    side, slope = _side(later, xmin, counting), alpha - 1
    share = side.n_tail / side.n if side.n else None
    if _silent(side):
        return _untested(_why(side, "the window", xmin), side, xmin, alpha_earlier=alpha, share_later=share)
    if counting == "whole":
        assert side.data is not None
        nodes = _nodes((side.data,), xmin, min(slope, 1 / side.mean_y))
        fitted = _whole_fit(side.data, nodes)
        planned = log_terms_at(POWER_LAW, np.array([slope]), side.data, nodes)
        alpha_later = 1 + float(fitted.theta[0])
        p = _chi2_1(summed(side.data.counts, fitted.log_terms - planned))
        method = "likelihood ratio of whole sizes against the planned exponent, chi-square with 1 degree of freedom"
    else:
        alpha_later = 1 + _measured_slope(side)
        statistic, freedom = 2 * side.n_tail * slope * side.mean_y, 2.0 * side.n_tail
        p = _two_sided(float(chdtr(freedom, statistic)), float(chdtrc(freedom, statistic)))
        method = f"exact chi-square test with {2 * side.n_tail} degrees of freedom against the planned exponent"
    ratio = (alpha_later - 1) / slope
    return Comparison(
        xmin=xmin, n_earlier=None, n_later=side.n_tail, alpha_earlier=alpha, alpha_later=alpha_later,
        ratio=ratio, p=p, direction=_direction(ratio), method=method, share_later=share,
    )  # fmt: skip


def _on_grid(sample: Sample) -> Sample:
    """The sample rounded to the grid."""
    if sample.cells is not None:
        return sample
    cells, place = np.unique(cell_of(sample.sizes), return_inverse=True)
    counts = np.zeros(len(cells), np.int64)
    np.add.at(counts, place, sample.counts)
    return Sample.of_cells(cells, counts)


def _side(sample: Sample, xmin: float, counting: Counting) -> _Side:
    start_cell = None if sample.cells is None else int(cell_of(np.array([xmin]))[0])
    where, bound = (sample.sizes, xmin) if start_cell is None else (sample.cells, start_cell)
    assert where is not None
    first = int(np.searchsorted(where, bound, side="left"))
    n_tail = int(sample.counts[first:].sum())
    if n_tail == 0:
        return _Side(data=None, n_tail=0, n=sample.n, mean_y=0.0, on_grid=False)
    data = tail_data(sample, xmin, counting, start_cell)
    if start_cell is None or sample.cells is None:
        y = data.nodes.y
    else:
        y = np.asarray(sample.cells[first:] - start_cell + 0.5, np.float64) * CELL_WIDTH
    return _Side(
        data=data, n_tail=n_tail, n=sample.n, mean_y=summed(data.counts, y) / n_tail, on_grid=start_cell is not None
    )


def _silent(side: _Side) -> bool:
    return side.n_tail == 0 or side.mean_y <= 0


def _why(side: _Side, who: str, xmin: float) -> str:
    if side.n_tail == 0:
        return f"not tested: {who} holds no event at or above {xmin:g}"
    return f"not tested: all {side.n_tail} tail events of {who} have the size {xmin:g}"


def _compared(earlier: _Side, later: _Side, xmin: float, counting: Counting) -> Comparison:
    """Both tests, of the exponents and of the shares."""
    share_earlier = earlier.n_tail / earlier.n if earlier.n else None
    share_later = later.n_tail / later.n if later.n else None
    share_p = two_shares_p(earlier.n_tail, earlier.n, later.n_tail, later.n)
    for side, who in ((earlier, "the earlier window"), (later, "the later window")):
        if _silent(side):
            return _untested(
                _why(side, who, xmin), later, xmin, n_earlier=earlier.n_tail,
                share_earlier=share_earlier, share_later=share_later, share_p=share_p,
            )  # fmt: skip
    whole = counting == "whole"
    found = _whole_test(earlier, later, xmin) if whole else _measured_test(earlier, later)
    ratio = (found.later - 1) / (found.earlier - 1)
    return Comparison(
        xmin=xmin, n_earlier=earlier.n_tail, n_later=later.n_tail, alpha_earlier=found.earlier,
        alpha_later=found.later, ratio=ratio, p=found.p, direction=_direction(ratio), method=found.method,
        share_earlier=share_earlier, share_later=share_later, share_p=share_p,
    )  # fmt: skip


def _untested(
    why: str, later: _Side, xmin: float, *, n_earlier: int | None = None, alpha_earlier: float | None = None,
    share_earlier: float | None = None, share_later: float | None = None, share_p: float | None = None,
) -> Comparison:  # fmt: skip
    return Comparison(
        xmin=xmin, n_earlier=n_earlier, n_later=later.n_tail, alpha_earlier=alpha_earlier, alpha_later=None,
        ratio=None, p=None, direction=None, method=why,
        share_earlier=share_earlier, share_later=share_later, share_p=share_p,
    )  # fmt: skip


class _Exponents(msgspec.Struct, frozen=True):
    earlier: float
    later: float
    p: float
    method: str


def _measured_test(earlier: _Side, later: _Side) -> _Exponents:
    """F test on the ratio of the two means of logs."""
    statistic = earlier.mean_y / later.mean_y
    freedom = 2.0 * earlier.n_tail, 2.0 * later.n_tail
    p = _two_sided(float(fdtr(*freedom, statistic)), float(fdtrc(*freedom, statistic)))
    method = f"exact F test with {2 * earlier.n_tail} and {2 * later.n_tail} degrees of freedom"
    return _Exponents(1 + _measured_slope(earlier), 1 + _measured_slope(later), p, method)


def _measured_slope(side: _Side) -> float:
    """The exponent less 1; on the grid by its closed form there (Virkar & Clauset 2014), else 1 / mean log."""
    beyond_first = side.mean_y / CELL_WIDTH - 0.5
    if not side.on_grid or beyond_first <= 0:
        return 1 / side.mean_y
    return log1p(1 / beyond_first) / CELL_WIDTH


def _whole_test(earlier: _Side, later: _Side, xmin: float) -> _Exponents:
    """Likelihood ratio of two exponents against one."""
    assert earlier.data is not None
    assert later.data is not None
    both = _joined(earlier.data, later.data)
    nodes = _nodes((earlier.data, later.data), xmin, 1 / max(earlier.mean_y, later.mean_y))
    first, second, one = (_whole_fit(data, nodes) for data in (earlier.data, later.data, both))
    apart = summed(earlier.data.counts, first.log_terms) + summed(later.data.counts, second.log_terms)
    gain = apart - summed(both.counts, one.log_terms)
    method = "likelihood ratio of whole sizes, chi-square with 1 degree of freedom"
    return _Exponents(1 + float(first.theta[0]), 1 + float(second.theta[0]), _chi2_1(gain), method)


def _joined(first: TailData, second: TailData) -> TailData:
    """Both sides' events as one."""
    starts = [np.arange(len(side.nodes.y)) if side.starts is None else side.starts for side in (first, second)]
    nodes = Nodes(
        np.concatenate([first.nodes.y, second.nodes.y]),
        np.concatenate([first.nodes.log_weight, second.nodes.log_weight]),
    )
    counts = np.concatenate([first.counts, second.counts])
    return TailData(nodes, np.concatenate([starts[0], starts[1] + len(first.nodes.y)]), counts, first.xmin)


def _nodes(sides: tuple[TailData, ...], xmin: float, lowest_slope: float) -> Nodes:
    """Points on which every exponent that the search may try is normalised."""
    reach = max((reach_of(side, lowest_slope / 2) for side in sides), key=lambda reach: reach.stop)
    return support("whole", xmin, reach, first=min(reach.fine, 0.5))


def _whole_fit(data: TailData, nodes: Nodes) -> LawFit:
    """The exponent of highest likelihood; the likelihood is concave, so the search settles."""
    y = data.middles()
    half_unit = log1p(0.5 / data.xmin)
    start = 1 / (summed(data.counts, y) / data.n + half_unit)
    fit = fit_law(POWER_LAW, np.array([start]), data, nodes)
    assert fit is not None
    return fit


def _chi2_1(gain: float) -> float:
    """P(chi2_1 > 2 gain)."""
    return float(chdtrc(1.0, 2 * max(gain, 0.0)))


def _two_sided(below: float, above: float) -> float:
    return min(1.0, 2 * min(below, above))


def _direction(ratio: float) -> Literal["heavier", "lighter"] | None:
    if ratio == 1:
        return None
    return "heavier" if ratio < 1 else "lighter"
