"""Sums whose Fourier series falls too slowly: few sources, atoms, one source far wider than the rest, heavy tails."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from stagesum_server.engine.sum_law import SingleLaw, SumLaw, search_shortest

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from stagesum_server.engine.laws import StudentT

    Array = NDArray[np.float64]

MOST_ATOMS = 1 << 16
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(24)
# the same on [0, 1], crowded towards the ends: v = (1 - cos(pi u)) / 2
_SHARE = 0.5 * (1.0 - np.cos(0.5 * math.pi * (1.0 + _NODES)))
_SHARE_WEIGHTS = 0.25 * math.pi * _WEIGHTS * np.sin(0.5 * math.pi * (1.0 + _NODES))
SCALE_STEP = 0.25  # of the trapezoidal rule over the logarithm of chi-squared: its error is exp(-pi^2 / step)


class TooManyAtomsError(ValueError):
    """More different values than can be enumerated."""


def merge_atoms(parts: list[tuple[Array, Array]]) -> tuple[Array, Array]:
    """Values and probabilities of a sum of discrete laws; values equal but for rounding are one.

    Raises
    ------
    TooManyAtomsError
        Where the sum has more than MOST_ATOMS different values.

    """
    values, weights = np.zeros(1), np.ones(1)
    for more_values, more_weights in parts:
        all_values = (values[:, None] + more_values).ravel()
        all_weights = (weights[:, None] * more_weights).ravel()
        order = np.argsort(all_values, kind="stable")
        all_values, all_weights = all_values[order], all_weights[order]
        width = max(float(np.abs(all_values).max()), 1e-300)
        starts = np.flatnonzero(np.concatenate([[True], np.diff(all_values) > 1e-13 * width]))
        values, weights = all_values[starts], np.add.reduceat(all_weights, starts)
        if values.size > MOST_ATOMS:
            raise TooManyAtomsError
    return values, weights


class DiscreteLaw(SumLaw):
    """Atoms only: a staircase."""

    def __init__(self, values: Array, weights: Array, offset: float) -> None:
        self.values, self.weights = values + offset, weights
        self.lower, self.upper = float(self.values[0]), float(self.values[-1])
        self.mean = float(np.sum(weights * self.values))
        self.sigma = math.sqrt(float(np.sum(weights * (self.values - self.mean) ** 2)))
        self._slack = 1e-12 * (self.upper - self.lower)  # a limit at an atom counts it as inside
        self._below = np.concatenate([[0.0], np.cumsum(weights)])
        self._above = np.concatenate([np.cumsum(weights[::-1])[::-1], [0.0]])

    def cdf(self, x: Array) -> Array:  # noqa: D102 - said by SumLaw, as below
        return np.asarray(self._below[np.searchsorted(self.values, np.asarray(x) + self._slack, side="right")])

    def sf(self, x: Array) -> Array:  # noqa: D102
        return np.asarray(self._above[np.searchsorted(self.values, np.asarray(x) + self._slack, side="right")])

    def outside(self, lower: float, upper: float) -> float:  # noqa: D102
        below = self._below[np.searchsorted(self.values, lower - self._slack, side="left")]
        return float(below + self.sf(np.array([upper]))[0])

    def quantile(self, p: float) -> float:  # noqa: D102
        return float(self.values[min(int(np.searchsorted(self._below[1:], p * (1.0 - 1e-14))), self.values.size - 1)])

    def shortest(self, coverage: float) -> tuple[float, float] | None:  # noqa: D102
        return search_shortest(self, coverage)

    def upper_quantile(self, q: float) -> float:  # noqa: D102
        exceeding = self._above[1:]
        return float(self.values[int(np.argmax(exceeding <= q * (1.0 + 1e-14)))])


class AtomMixture(SumLaw):
    """Atoms plus a law with a density: a weighted sum of shifted copies."""

    def __init__(self, values: Array, weights: Array, rest: SumLaw) -> None:
        self.values, self.weights, self.rest = values, weights, rest
        self.lower, self.upper = float(values[0]) + rest.lower, float(values[-1]) + rest.upper
        mean = float(np.sum(weights * values))
        self.mean = mean + rest.mean
        self.sigma = math.hypot(math.sqrt(float(np.sum(weights * (values - mean) ** 2))), rest.sigma)

    def _mix(self, f: Callable[[Array], Array], x: Array) -> Array:
        x = np.asarray(x, dtype=np.float64)
        shifted = f((x[:, None] - self.values).ravel()).reshape(x.size, -1)
        return np.asarray(np.sum(self.weights * shifted, axis=1))

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return self._mix(self.rest.cdf, x)

    def sf(self, x: Array) -> Array:  # noqa: D102
        return self._mix(self.rest.sf, x)


class ConditionedLaw(SumLaw):
    """B + R with B one wide source in closed form: P(B + R > x) is the mean of P(R > x - b) over B's density.

    All parts are positive, so the relative accuracy of both laws' tails is kept. The integral is taken in panels
    between all breaks of both, with nodes that crowd towards their ends (an arcsine density is infinite there).
    """

    def __init__(self, wide: SingleLaw, rest: SumLaw) -> None:
        self.wide, self.rest = wide, rest
        self.lower, self.upper = wide.lower + rest.lower, wide.upper + rest.upper
        self.mean, self.sigma = wide.mean + rest.mean, math.hypot(wide.sigma, rest.sigma)
        spread = rest.mean + rest.sigma * np.array([-12.0, -8.0, -5.0, -2.5, 0.0, 2.5, 5.0, 8.0, 12.0])
        inner = rest.breaks if isinstance(rest, SingleLaw | ConditionedLaw) else spread
        ends = np.array([rest.lower, rest.upper])
        self._rest_breaks = np.unique(np.clip(np.concatenate([inner, ends]), rest.lower, rest.upper))

    @property
    def breaks(self) -> Array:
        """Places where the density bends: sums of both laws' breaks."""
        return np.unique((self.wide.breaks[:, None] + self._rest_breaks).ravel())

    def sf(self, x: Array) -> Array:  # noqa: D102
        return np.array([self._one(float(value), 1.0) for value in np.atleast_1d(x)])

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return np.array([self._one(float(value), -1.0) for value in np.atleast_1d(x)])

    def _one(self, x: float, side: float) -> float:
        if side > 0.0:
            sure = float(self.wide.sf(np.array([x - self.rest.lower]))[0])
        else:
            sure = float(self.wide.cdf(np.array([x - self.rest.upper]))[0])
        low, high = max(self.wide.lower, x - self.rest.upper), min(self.wide.upper, x - self.rest.lower)
        if low >= high:
            return min(sure, 1.0)
        b, w = self._nodes(x, low, high)
        tail = self.rest.sf(x - b) if side > 0.0 else self.rest.cdf(x - b)
        return min(1.0, sure + float(np.sum(w * self.wide.density(b) * tail)))

    def _nodes(self, x: float, low: float, high: float) -> tuple[Array, Array]:
        """Nodes and weights over [low, high], in panels between the breaks of both laws."""
        breaks = np.concatenate([self.wide.breaks, x - self._rest_breaks])
        edges = np.unique(np.concatenate([[low, high], breaks[(breaks > low) & (breaks < high)]]))
        width = np.diff(edges)[:, None]
        return (edges[:-1, None] + width * _SHARE).ravel(), (width * _SHARE_WEIGHTS).ravel()


class ScaleMixture(SumLaw):
    """A Student t source among others: normal laws whose variance is spread as dof / chi-squared.

    ``make(variance)`` gives the law of the sum with the t source replaced by a normal one. The mean over the
    logarithm of chi-squared is taken by the trapezoidal rule, whose error falls exponentially with its step.
    """

    def __init__(self, law: StudentT, coefficient: float, make: Callable[[float], SumLaw], sigma: float) -> None:
        nu = law.dof
        v = np.arange(-80.0 / nu - 2.0, math.log(100.0 / nu + 6.0), SCALE_STEP)
        weights = np.exp(0.5 * nu * (v - np.exp(v) + 1.0))
        keep = weights > 1e-18 * weights.max()
        self.weights = weights[keep] / weights[keep].sum()
        self.parts = [make((coefficient * law.s) ** 2 * math.exp(-value)) for value in v[keep]]
        self.lower, self.upper = min(part.lower for part in self.parts), max(part.upper for part in self.parts)
        self.mean, self.sigma = self.parts[0].mean, sigma

    def _mix(self, values: list[Array]) -> Array:
        return np.asarray(np.sum(self.weights[:, None] * np.stack(values), axis=0))

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return self._mix([part.cdf(x) for part in self.parts])

    def sf(self, x: Array) -> Array:  # noqa: D102
        return self._mix([part.sf(x) for part in self.parts])
