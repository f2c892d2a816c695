"""Maximum likelihood of a rival tail by Fisher scoring with a line search.

For the lognormal, the exponential and the cut-off the log likelihood of exact sizes is concave (exponential
families), so that every step of the search climbs to the one maximum. On the grid a step uses the information of the
unrounded sizes, which differs by about (width of a cell / spread of the log sizes)^2 / 12.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from monitor.tail.base_measure import Nodes, TailData, summed
from monitor.tail.rival_laws import Density, Floats

_MOST_STEPS = 100
_LONGEST_STEP = 2.0


@dataclass(frozen=True, slots=True)
class LawFit:
    """A law fitted to the tail.

    theta      its parameters
    log_terms  float64 (k,): log probability (density) of one event of each group
    """

    theta: Floats
    log_terms: Floats


def log_terms(log_density: Floats, log_constant: float, data: TailData) -> Floats:
    """Log probability of each group from the log density at its points, float64 (k,)."""
    if data.starts is None:
        return log_density - log_constant
    joined = log_density + data.nodes.log_weight
    return np.logaddexp.reduceat(joined, data.starts) - log_constant


def log_constant(log_density: Floats, nodes: Nodes) -> float:
    """Logarithm of the whole mass of a density given at the nodes."""
    joined = log_density + nodes.log_weight
    top = float(joined.max())
    return top + float(np.log(np.exp(joined - top).sum()))


class _Point:
    """The log likelihood at one theta, with its gradient and information on demand."""

    def __init__(self, law: Density, theta: Floats, data: TailData, nodes: Nodes) -> None:
        self.law, self.theta, self.data, self.nodes = law, theta, data, nodes
        self._at_nodes = law.log_density(theta, nodes.y)
        self._at_data = law.log_density(theta, data.nodes.y)
        self._constant = log_constant(self._at_nodes, nodes)
        self.terms = log_terms(self._at_data, self._constant, data)
        self.value = summed(data.counts, self.terms)

    def gradient_and_information(self) -> tuple[Floats, Floats]:
        """Derivative of the log likelihood, float64 (p,), and n times the covariance of the scores, float64 (p, p)."""
        data = self.data
        share = np.exp(self._at_nodes + self.nodes.log_weight - self._constant)
        scores = self.law.scores(self.theta, self.nodes.y)
        mean = np.sum(scores * share, axis=1)
        second = np.array([[summed(one * share, other) for other in scores] for one in scores])
        information = data.n * (second - np.outer(mean, mean) * share.sum())
        weight = data.counts
        if data.starts is not None:
            lengths = np.diff(np.append(data.starts, len(data.nodes.y)))
            own = self._at_data + data.nodes.log_weight - self._constant
            weight = np.exp(own - np.repeat(self.terms, lengths)) * np.repeat(data.counts, lengths)
        gradient = np.sum(self.law.scores(self.theta, data.nodes.y) * weight, axis=1) - data.n * mean
        return gradient, information


def log_terms_at(law: Density, theta: Floats, data: TailData, nodes: Nodes) -> Floats:
    """Log probability (density) of one event of each group under given parameters, float64 (k,)."""
    return _Point(law, theta, data, nodes).terms


def climbs_at_start(law: Density, theta: Floats, data: TailData, nodes: Nodes) -> bool:
    """Does the likelihood rise as the last parameter leaves its edge at `theta`, the others being at their best?"""
    gradient, information = _Point(law, theta, data, nodes).gradient_and_information()
    # A rise within the rounding of the sums is none.
    return bool(gradient[-1] > 1e-9 * np.sqrt(information[-1, -1] * data.n))


def fit_law(law: Density, theta: Floats, data: TailData, nodes: Nodes) -> LawFit | None:
    """The law's parameters of highest likelihood, from `theta` on; None when the search does not settle."""
    point = _Point(law, theta, data, nodes)
    tolerance = 1e-9 + 1e-15 * data.n
    for _ in range(_MOST_STEPS):
        gradient, information = point.gradient_and_information()
        if not np.all(np.isfinite(gradient)) or not np.all(np.isfinite(information)):
            return None
        step = _step(gradient, information)
        if not np.all(np.isfinite(step)):
            return None
        for place in law.logs:
            step = step * min(1.0, _LONGEST_STEP / max(abs(float(step[place])), _LONGEST_STEP))
        promised = float(gradient @ step)
        if promised < tolerance:
            return LawFit(point.theta, point.terms)
        further = _along(point, step, promised)
        if further is None:
            # No rise is left that doubles can show.
            return LawFit(point.theta, point.terms) if promised < 1e-5 * (1 + 1e-6 * data.n) else None
        point = further
    return None


def _step(gradient: Floats, information: Floats) -> Floats:
    """The scoring step, solved in units of each parameter's own information; not finite where that is nought."""
    unit = np.sqrt(np.maximum(np.diag(information), 1e-300))
    scaled = information / np.outer(unit, unit) + 1e-13 * np.eye(len(unit))
    with np.errstate(over="ignore", invalid="ignore"):  # a parameter that the data say nothing about: no step, no fit
        step: Floats = np.linalg.solve(scaled, gradient / unit) / unit
    return step


def _along(point: _Point, step: Floats, promised: float) -> _Point | None:
    """The first of step, step/2, step/4, ... that stays inside and climbs enough (Armijo's rule)."""
    length = 1.0
    while length > 1e-9:
        theta = point.theta + length * step
        if point.law.inside(theta) and np.all(np.abs(theta) < 1e60):
            further = _Point(point.law, theta, point.data, point.nodes)
            if further.value > point.value + 1e-4 * length * promised:
                return further
        length /= 2
    return None
