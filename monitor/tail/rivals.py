"""Rival tails against the power law above the same xmin: Vuong's test and the sizes that a rival expects.

Sources: Vuong, Econometrica 57 (1989) 307; Clauset, Shalizi & Newman (CSN), SIAM Review 51 (2009) 661, section 5 and
appendix C. The whole-size versions are the same densities taken at the integers and normalised by their sum there.
"""

from __future__ import annotations

from math import exp, inf, isfinite, log, sqrt
from typing import Literal

import numpy as np
from scipy.special import erfc, logsumexp

from monitor.tail.base_measure import Nodes, Reach, TailData, reach_of, summed, support, tail_data
from monitor.tail.judgement import Counting, Rival
from monitor.tail.rival_fit import climbs_at_start, fit_law, log_constant, log_terms
from monitor.tail.rival_laws import LAWS, Floats, Law
from monitor.tail.sample import Sample
from monitor.tail.whole_law import log_zeta
from storage.grid import cell_of

FAVOURED_BELOW = 0.1
"""The two-sided p below which Vuong's test is taken to prefer one side (CSN section 5.2)."""
_INVISIBLE = 0.01
"""A lognormal or stretched exponential whose log likelihood is within this of the power law's has become the power
law: both hold it as a limit, so that their parameters (mu = -700, beta = 0.001) mean nothing any more."""

_STEEPEST = 1e5
"""Sizes this close together (to one part in 1e5) follow every law at once."""

Favours = Literal["power law", "rival", "neither", "not determined"]


def compare_rivals(sample: Sample, *, xmin: float, alpha: float, counting: Counting) -> tuple[Rival, ...]:
    """The four rivals against the power law of exponent `alpha` above `xmin`, in a fixed order.

    Parameters: alpha, the maximum-likelihood exponent at this xmin, > 1; xmin, on the grid the lower edge
    of a cell. Returns lognormal, exponential, stretched exponential (Vuong's z, two-sided p) and power law with
    cut-off (holds the power law: z is None and p is that of the likelihood ratio, chi-square with 1 degree
    of freedom, which is cautious since the plain law lies at the edge). A rival whose likelihood only rises
    towards the edge of its parameters, where it is the power law itself, is 'not determined'; the cut-off then has
    ratio 0 and p 1: the data show no cut-off.
    """
    data = _data(sample, xmin, counting)
    if not _has_spread(data) or alpha > _STEEPEST:
        return tuple(_undetermined(law) for law in LAWS)
    slope = alpha - 1
    reach = reach_of(data, slope)
    nodes = support(counting, xmin, reach, first=min(reach.fine, 1.0))
    at_nodes, at_data = -slope * nodes.y, -slope * data.nodes.y
    power_law = log_terms(at_data, log_constant(at_nodes, nodes), data)
    return tuple(_against(law, data, nodes, power_law, slope, counting) for law in LAWS)


def best_rival(rivals: tuple[Rival, ...]) -> Rival | None:
    """The rival that describes the tail best, if one does better than the power law; else None.

    Better is by Akaike's criterion (log likelihood minus the number of parameters), so that a second
    parameter must earn its keep.
    """
    parameters = {law.name: law.parameters for law in LAWS}
    best, best_gain = None, 0.0
    for rival in rivals:
        if rival.log_likelihood_ratio is None:
            continue
        gain = -rival.log_likelihood_ratio - (parameters[rival.tail] - 1)
        if gain > best_gain:
            best, best_gain = rival, gain
    return best


def rival_size(
    rival: Rival, sample: Sample, xmin: float, n_tail: int, one_in: float, *, counting: Counting = "measured"
) -> float | None:
    """The size passed once in `one_in` events if the tail above xmin follows `rival`.

    For whole sizes the smallest integer x with P(X > x) <= 1 / one_in. None when that size lies below xmin,
    when the rival is not determined, or when the size is beyond what doubles hold.
    """
    share = n_tail / sample.n
    log_survival = _survival_of(rival, xmin, counting)
    if log_survival is None or one_in * share < 1:
        return None
    find = _whole_quantile if counting == "whole" else _quantile
    return find(log_survival, -log(one_in * share))


def rival_survival(rival: Rival, sizes: Floats, xmin: float, *, counting: Counting = "measured") -> Floats | None:
    """Share of the tail above xmin that is at or above each size if it follows `rival`, float64 (k,).

    1 at and below xmin. Whole sizes: the share at or above the next integer. None when the rival is not determined.
    """
    log_survival = _survival_of(rival, xmin, counting)
    if log_survival is None:
        return None
    places = np.ceil(sizes) if counting == "whole" else sizes
    return np.array([exp(min(log_survival(log(x) - log(xmin)), 0.0)) if x > xmin else 1.0 for x in places.tolist()])


def _survival_of(rival: Rival, xmin: float, counting: Counting) -> _Survival | None:
    if rival.log_likelihood_ratio is None or not rival.parameters:
        return None
    law = next(law for law in LAWS if law.name == rival.tail)
    if rival.tail == "power law with cut-off" and "cutoff" not in rival.parameters:
        return _Survival(law, np.array([rival.parameters["alpha"] - 1, -inf]), xmin, counting)
    return _Survival(law, law.theta(rival.parameters, xmin), xmin, counting)


def _data(sample: Sample, xmin: float, counting: Counting) -> TailData:
    start_cell = None if sample.cells is None else int(cell_of(np.array([xmin]))[0])
    return tail_data(sample, xmin, counting, start_cell)


def _has_spread(data: TailData) -> bool:
    """Three different sizes at least: with fewer every two-parameter law fits without error."""
    return len(data.counts) >= 3


def _undetermined(law: Law) -> Rival:
    return Rival(tail=law.name, log_likelihood_ratio=None, z=None, p=None, favours="not determined")


def _against(law: Law, data: TailData, nodes: Nodes, power_law: Floats, slope: float, counting: Counting) -> Rival:
    """One rival's record."""
    nested = law.name == "power law with cut-off"
    start = law.start(data, slope)
    if nested and not _cut_off_shows(data, slope, counting):
        return _nested(0.0, {"alpha": 1 + float(slope)})
    if law.parameters == 2 and not nested and not climbs_at_start(law, start, data, nodes):
        return _undetermined(law)
    fit = fit_law(law, start, data, nodes)
    if fit is None:
        return _undetermined(law)
    difference = power_law - fit.log_terms
    ratio = summed(data.counts, difference)
    if law.parameters == 2 and not nested and ratio > -_INVISIBLE:
        return _undetermined(law)
    figures = law.figures(fit.theta, data.xmin)
    if not all(isfinite(value) for value in figures.values()):
        return _undetermined(law)
    if nested:
        return _nested(min(ratio, 0.0), figures)
    return _vuong(law, difference, ratio, data=data, figures=figures)


def _nested(ratio: float, figures: dict[str, float]) -> Rival:
    """The cut-off's record: 2 |ratio| is chi-square with 1 degree of freedom if there is none (CSN section 5.3)."""
    p = float(erfc(sqrt(-ratio)))
    favours: Favours = "rival" if p < FAVOURED_BELOW else "neither"
    return Rival(
        tail="power law with cut-off",
        log_likelihood_ratio=ratio,
        z=None,
        p=p,
        favours=favours,
        parameters=figures,
    )


def _vuong(law: Law, difference: Floats, ratio: float, *, data: TailData, figures: dict[str, float]) -> Rival:
    """Vuong's normalised ratio (CSN equation C.6) for a rival that does not hold the power law."""
    n = data.n
    spread = sqrt(summed(data.counts, (difference - ratio / n) ** 2) / n)
    if spread == 0:
        return _undetermined(law)
    z = ratio / (sqrt(n) * spread)
    p = float(erfc(abs(z) / sqrt(2)))
    favours: Favours = "neither" if p >= FAVOURED_BELOW else "power law" if ratio > 0 else "rival"
    # At the edge of the parameters half of chi-square 1 (Self & Liang, J. Amer. Statist. Assoc. 82 (1987) 605, case 5).
    nested_p = float(erfc(sqrt(max(-ratio, 0.0)))) / 2 if law.parameters == 2 else None
    return Rival(
        tail=law.name, log_likelihood_ratio=ratio, z=z, p=p, favours=favours, parameters=figures, nested_p=nested_p
    )


def _cut_off_shows(data: TailData, slope: float, counting: Counting) -> bool:
    """Does the likelihood rise as a cut-off comes in from infinity?

    It does when the mean of x in the tail lies below the fitted law's, which is infinite for alpha <= 2.
    """
    if slope <= 1:
        return True
    y, weight = data.nodes.y, np.log(data.counts)
    if data.starts is None:
        log_mean = float(logsumexp(y + weight)) - log(data.n)
    else:
        at_data = data.nodes.log_weight - slope * data.nodes.y
        inside = np.logaddexp.reduceat(at_data + y, data.starts) - np.logaddexp.reduceat(at_data, data.starts)
        log_mean = float(logsumexp(inside + weight)) - log(data.n)
    if counting == "whole":
        ends = log_zeta(np.array([slope, slope + 1]), np.ceil(data.xmin))
        expected = float(ends[0] - ends[1]) - log(data.xmin)
    else:
        expected = log(slope) - log(slope - 1)
    return log_mean < expected


class _Survival:
    """Logarithm of the share of the tail at or above a size, for a law with known parameters."""

    def __init__(self, law: Law, theta: Floats, xmin: float, counting: Counting) -> None:
        self.law, self.theta, self.xmin, self.counting = law, theta, xmin, counting
        self._all = self._mass(0.0)

    def __call__(self, y: float) -> float:
        return self._mass(y) - self._all

    def _mass(self, y: float) -> float:
        stop = self._end(y)
        reach = Reach(stop, stop, max((stop - y) / 16, 1e-12))
        nodes = support(self.counting, self.xmin, reach, start=y, first=reach.fine / 64)
        return log_constant(self.law.log_density(self.theta, nodes.y), nodes)

    def _end(self, y: float) -> float:
        """Where the density has fallen by e^-45 from its highest value at or above y."""
        if self.law.name == "power law with cut-off" and self.theta[1] == -inf:
            return y + 45 / float(self.theta[0])
        grid = y + np.concatenate([[0.0], np.geomspace(1e-9, 3000.0, 400)])
        density = self.law.log_density(self.theta, grid)
        alive = np.flatnonzero(density >= density.max() - 45)
        return float(grid[min(int(alive[-1]) + 1, len(grid) - 1)])


def _quantile(log_survival: _Survival, wanted: float) -> float | None:
    """The size whose log survival is `wanted`, by bisection in y to the last digits."""
    low, high = 0.0, 1.0
    while log_survival(high) > wanted:
        low, high = high, 2 * high
        if high > 1500:
            return None
    for _ in range(60):
        middle = (low + high) / 2
        low, high = (middle, high) if log_survival(middle) > wanted else (low, middle)
        if high - low < 1e-12 * max(1.0, high):
            break
    log_size = log(log_survival.xmin) + high
    return exp(log_size) if log_size < 709 else None


def _whole_quantile(log_survival: _Survival, wanted: float) -> float | None:
    """The smallest integer x with log P(X > x) <= `wanted`."""
    xmin = log_survival.xmin

    def passed(x: float) -> float:
        return log_survival(log((x + 1) / xmin))

    high = float(np.ceil(xmin))  # on the grid xmin is the edge of a cell
    low = high - 1
    while passed(high) > wanted:
        low, high = high, 2 * high
        if high > 1e300:
            return None
    while high - low > 1 and high - low > 1e-15 * high:
        middle = float(np.floor(low + (high - low) / 2))
        low, high = (middle, high) if passed(middle) > wanted else (low, middle)
    return high
