"""The rival tails as log densities over y = ln(x / xmin), known up to their constant, with their scores.

Each law is written in parameters that stay regular where it becomes the power law itself: lognormal exp(-b y - c y^2)
at c = 0, stretched exponential at beta = 0, cut-off at rate 0. Sources: Clauset, Shalizi & Newman, SIAM Review 51
(2009) 661, table 2.1; the normal truncated from below as such a family: del Castillo, Annals of the Institute of
Statistical Mathematics 46 (1994) 57, where the maximum of the likelihood exists if and only if the coefficient of
variation of y is below 1. The same condition holds for the stretched exponential, whose log likelihood, with its
rate profiled out, is minus the log moment generating function of a measure plus a linear term, hence concave in beta.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import exp, log, sqrt
from typing import Literal, Protocol

import numpy as np
from numpy.typing import NDArray
from scipy.special import logsumexp

from monitor.tail.base_measure import TailData

Floats = NDArray[np.float64]
RivalName = Literal["lognormal", "exponential", "stretched exponential", "power law with cut-off"]

# exp(300) squared is still a double, and exp(-exp(300)) is 0 just as the truth is.
_HIGHEST_EXPONENT = 300.0
_HIGHEST_LOG = 100.0
"""Of a rate or slope at xmin: sizes that differ only in their 43rd digit would ask for more."""


def _exp(values: Floats) -> Floats:
    out: Floats = np.exp(np.minimum(values, _HIGHEST_EXPONENT))
    return out


def _excess(log_rate: float, y: Floats) -> Floats:
    """exp(log_rate) (exp(y) - 1) without overflow and without losing small y."""
    rate = exp(log_rate)
    small = rate * np.expm1(np.minimum(y, 1.0))
    large = _exp(log_rate + np.maximum(y, 1.0)) - rate
    return np.where(y < 1.0, small, large)


class Density(Protocol):
    """A law as the search needs it.

    logs  which of its parameters are logarithms: the search moves them by 2 at most in one step
    """

    @property
    def logs(self) -> tuple[int, ...]: ...

    def inside(self, theta: Floats) -> bool:
        """Is this a point of the parameter space?"""
        ...

    def log_density(self, theta: Floats, y: Floats) -> Floats:
        """Logarithm of the density in y, up to a constant."""
        ...

    def scores(self, theta: Floats, y: Floats) -> Floats:
        """Derivatives of log_density by the parameters, float64 (parameters, len(y))."""
        ...


class Law(Density, Protocol):
    """One rival law.

    name        as in the results
    parameters  how many
    """

    @property
    def name(self) -> RivalName: ...

    @property
    def parameters(self) -> int: ...

    def start(self, data: TailData, slope: float) -> Floats:
        """Where the search begins; slope = alpha - 1 of the fitted power law."""
        ...

    def figures(self, theta: Floats, xmin: float) -> dict[str, float]:
        """The parameters as they are published, in the unit of the sizes."""
        ...

    def theta(self, figures: dict[str, float], xmin: float) -> Floats:
        """The inverse of `figures`."""
        ...


@dataclass(frozen=True)
class PowerLaw:
    """theta = (slope,): density exp(-slope y), slope = alpha - 1 > 0."""

    logs: tuple[int, ...] = ()

    def inside(self, theta: Floats) -> bool:
        return bool(theta[0] > 0)

    def log_density(self, theta: Floats, y: Floats) -> Floats:
        return -float(theta[0]) * y

    def scores(self, theta: Floats, y: Floats) -> Floats:
        return -y[None, :]


POWER_LAW = PowerLaw()


@dataclass(frozen=True)
class Lognormal:
    """theta = (b, c): density exp(-b y - c y^2), c > 0; sigma^2 = 1 / (2c), mu = ln xmin - b / (2c)."""

    name: RivalName = "lognormal"
    parameters: int = 2
    logs: tuple[int, ...] = ()

    def start(self, data: TailData, slope: float) -> Floats:
        return np.array([slope, 0.0])

    def inside(self, theta: Floats) -> bool:
        return bool(theta[1] > 0)

    def log_density(self, theta: Floats, y: Floats) -> Floats:
        out: Floats = -(theta[0] + theta[1] * y) * y
        return out

    def scores(self, theta: Floats, y: Floats) -> Floats:
        return np.stack([-y, -y * y])

    def figures(self, theta: Floats, xmin: float) -> dict[str, float]:
        b, c = float(theta[0]), float(theta[1])
        return {"mu": log(xmin) - b / (2 * c), "sigma": sqrt(1 / (2 * c))}

    def theta(self, figures: dict[str, float], xmin: float) -> Floats:
        variance = figures["sigma"] ** 2
        return np.array([(log(xmin) - figures["mu"]) / variance, 1 / (2 * variance)])


@dataclass(frozen=True)
class Exponential:
    """theta = (ln rate,), rate per xmin: density exp(y - rate (exp y - 1))."""

    name: RivalName = "exponential"
    parameters: int = 1
    logs: tuple[int, ...] = (0,)

    def start(self, data: TailData, slope: float) -> Floats:
        y = data.middles()
        some = y > 0
        y, counts = y[some], data.counts[some]
        return np.array([log(data.n) - float(logsumexp(y + np.log(-np.expm1(-y)), b=counts))])

    def inside(self, theta: Floats) -> bool:
        return bool(theta[-1] < _HIGHEST_LOG)

    def log_density(self, theta: Floats, y: Floats) -> Floats:
        return y - _excess(float(theta[0]), y)

    def scores(self, theta: Floats, y: Floats) -> Floats:
        return -_excess(float(theta[0]), y)[None, :]

    def figures(self, theta: Floats, xmin: float) -> dict[str, float]:
        return {"scale": exp(min(log(xmin) - float(theta[0]), 700.0))}

    def theta(self, figures: dict[str, float], xmin: float) -> Floats:
        return np.array([log(xmin) - log(figures["scale"])])


@dataclass(frozen=True)
class StretchedExponential:
    """theta = (ln slope, beta): survival exp(-(slope / beta) ((x / xmin)^beta - 1)), slope its exponent at xmin."""

    name: RivalName = "stretched exponential"
    parameters: int = 2
    logs: tuple[int, ...] = (0,)

    def start(self, data: TailData, slope: float) -> Floats:
        return np.array([log(slope), 0.0])

    def inside(self, theta: Floats) -> bool:
        return bool(theta[1] > 0 and theta[0] < _HIGHEST_LOG)

    def log_density(self, theta: Floats, y: Floats) -> Floats:
        beta = float(theta[1])
        return beta * y - exp(float(theta[0])) * y * _mean_growth(beta * y)

    def scores(self, theta: Floats, y: Floats) -> Floats:
        slope, z = exp(float(theta[0])), float(theta[1]) * y
        return np.stack([-slope * y * _mean_growth(z), y - slope * y * y * _growth_slope(z)])

    def figures(self, theta: Floats, xmin: float) -> dict[str, float]:
        return {"beta": float(theta[1]), "slope_at_xmin": exp(float(theta[0]))}

    def theta(self, figures: dict[str, float], xmin: float) -> Floats:
        return np.array([log(figures["slope_at_xmin"]), figures["beta"]])


def _mean_growth(z: Floats) -> Floats:
    """(exp z - 1) / z, 1 at z = 0."""
    z = np.minimum(z, _HIGHEST_EXPONENT)
    out: Floats = np.expm1(z) / np.where(z == 0, 1.0, z)
    return np.where(z == 0, 1.0, out)


def _growth_slope(z: Floats) -> Floats:
    """Derivative of (exp z - 1) / z; near 0 by its series, where the formula loses its digits."""
    z = np.minimum(z, _HIGHEST_EXPONENT)
    near = np.abs(z) < 0.02
    safe = np.where(near, 1.0, z)
    series = 0.5 + z / 3 + z**2 / 8 + z**3 / 30 + z**4 / 144 + z**5 / 840
    return np.where(near, series, (safe * np.exp(safe) - np.expm1(safe)) / safe**2)


@dataclass(frozen=True)
class CutOff:
    """theta = (alpha - 1, ln rate), rate per xmin: density exp(-(alpha - 1) y - rate (exp y - 1))."""

    name: RivalName = "power law with cut-off"
    parameters: int = 2
    logs: tuple[int, ...] = (1,)

    def start(self, data: TailData, slope: float) -> Floats:
        return np.array([slope, -float(data.middles()[-1])])

    def inside(self, theta: Floats) -> bool:
        return bool(theta[-1] < _HIGHEST_LOG)

    def log_density(self, theta: Floats, y: Floats) -> Floats:
        return -float(theta[0]) * y - _excess(float(theta[1]), y)

    def scores(self, theta: Floats, y: Floats) -> Floats:
        return np.stack([-y, -_excess(float(theta[1]), y)])

    def figures(self, theta: Floats, xmin: float) -> dict[str, float]:
        return {"alpha": 1 + float(theta[0]), "cutoff": exp(min(log(xmin) - float(theta[1]), 700.0))}

    def theta(self, figures: dict[str, float], xmin: float) -> Floats:
        return np.array([figures["alpha"] - 1, log(xmin) - log(figures["cutoff"])])


LAWS: tuple[Law, ...] = (Lognormal(), Exponential(), StretchedExponential(), CutOff())
