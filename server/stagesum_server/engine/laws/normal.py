"""Normal, cut normal and Student t laws."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, ClassVar

import numpy as np
from scipy import special

from stagesum_server.engine.laws.base import FAMILY_TOLERANCE, SQRT_2PI, Law, normal_content, normal_density

if TYPE_CHECKING:
    from stagesum_server.engine.laws.base import Array

WIDE_PARENT = 1.0  # cuts closer than this (in sigmas): the closed form of the variance cancels, quadrature does not
REJECTION_CONTENT = 0.6  # below this share, drawing again costs more than one quantile


@dataclass(frozen=True)
class Normal(Law):
    """Normal law; ``lower`` and ``upper`` bound the worst case only, draws may lie outside.

    ``declared`` tells bounds that a data sheet states from bounds that are so many sigmas: the
    latter shrink when readings are averaged.
    """

    m: float
    s: float
    lower: float
    upper: float
    declared: bool = False
    shape: ClassVar[str] = "normal"
    bounded: ClassVar[bool] = False

    @property
    def mean(self) -> float:  # noqa: D102 - said by Law, as below
        return self.m

    @property
    def sigma(self) -> float:  # noqa: D102
        return self.s

    def quantile(self, u: Array) -> Array:  # noqa: D102
        return np.asarray(self.m + self.s * special.ndtri(u))

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return special.ndtr((x - self.m) / self.s)

    def sf(self, x: Array) -> Array:  # noqa: D102
        return special.ndtr((self.m - x) / self.s)

    def density(self, x: Array) -> Array:  # noqa: D102
        return np.asarray(np.exp(-0.5 * ((x - self.m) / self.s) ** 2) / (SQRT_2PI * self.s))

    def from_scores(self, z: Array) -> Array:  # noqa: D102
        return np.asarray(self.m + self.s * z)

    @property
    def standard(self) -> tuple[float, float]:  # noqa: D102
        return self.s, self.m

    def draw_standard(self, rng: np.random.Generator, out: Array) -> None:  # noqa: D102
        rng.standard_normal(out=out)


@dataclass(frozen=True)
class TruncatedNormal(Law):
    """Normal law of centre ``m`` and scale ``s`` cut at ``lower`` and ``upper``.

    Moments: Johnson, Kotz, Balakrishnan, Continuous Univariate Distributions 1, 10.1.
    """

    m: float
    s: float
    lower: float
    upper: float
    shape: ClassVar[str] = "truncated_normal"

    @cached_property
    def cuts(self) -> tuple[float, float]:
        """The cuts in units of the parent's sigma, relative to its centre."""
        return (self.lower - self.m) / self.s, (self.upper - self.m) / self.s

    @cached_property
    def content(self) -> float:
        """Share of the parent law between the cuts."""
        return float(normal_content(*self.cuts))

    @cached_property
    def _moments(self) -> tuple[float, float]:
        """Mean and variance in units of the parent's sigma."""
        low, high = self.cuts
        if high - low < WIDE_PARENT:
            return _moments_by_quadrature(low, high)
        density_low, density_high = normal_density(low), normal_density(high)
        mean = (density_low - density_high) / self.content
        return mean, 1.0 + (low * density_low - high * density_high) / self.content - mean * mean

    @property
    def mean(self) -> float:  # noqa: D102
        return self.m + self.s * self._moments[0]

    @property
    def sigma(self) -> float:  # noqa: D102
        return self.s * math.sqrt(self._moments[1])

    def quantile(self, u: Array) -> Array:  # noqa: D102
        low, high = self.cuts
        if low > 0.0:  # work in the lower tail, where probabilities keep their digits
            z = -special.ndtri(special.ndtr(-high) + (1.0 - u) * self.content)
        else:
            z = special.ndtri(special.ndtr(low) + u * self.content)
        return np.clip(self.m + self.s * z, self.lower, self.upper)

    def cdf(self, x: Array) -> Array:  # noqa: D102
        z = np.clip((x - self.m) / self.s, *self.cuts)
        return normal_content(self.cuts[0], z) / self.content

    def sf(self, x: Array) -> Array:  # noqa: D102
        z = np.clip((x - self.m) / self.s, *self.cuts)
        return normal_content(z, self.cuts[1]) / self.content

    def density(self, x: Array) -> Array:  # noqa: D102
        inside = (x >= self.lower) & (x <= self.upper)
        parent = np.exp(-0.5 * ((x - self.m) / self.s) ** 2) / (SQRT_2PI * self.s * self.content)
        return np.where(inside, parent, 0.0)

    @property
    def standard(self) -> tuple[float, float]:  # noqa: D102
        return (self.s, self.m) if self.content >= REJECTION_CONTENT else (1.0, 0.0)

    def draw_standard(self, rng: np.random.Generator, out: Array) -> None:
        """Fill ``out``: by rejection where the cuts leave most of the parent, else by the quantile."""
        if self.content < REJECTION_CONTENT:
            super().draw_standard(rng, out)
            return
        low, high = self.cuts
        rng.standard_normal(out=out)
        outside = ((out < low) | (out > high)).nonzero()[0]
        while outside.size:
            again = rng.standard_normal(outside.size)
            out[outside] = again
            outside = outside[(again < low) | (again > high)]

    @property
    def symmetric(self) -> bool:  # noqa: D102
        return abs(self.cuts[0] + self.cuts[1]) < FAMILY_TOLERANCE

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (self.shape, *(round(cut, 9) for cut in self.cuts))


def _moments_by_quadrature(low: float, high: float) -> tuple[float, float]:
    """Mean and variance of the standard normal law cut at ``low`` and ``high``, for close cuts."""
    nodes, weights = np.polynomial.legendre.leggauss(32)
    middle, half = 0.5 * (low + high), 0.5 * (high - low)
    # only the shape between the cuts matters, so the density is taken relative to the middle's
    density = weights * np.exp(-half * nodes * (middle + 0.5 * half * nodes))
    mean = float(np.sum(density * nodes) / np.sum(density))
    variance = float(np.sum(density * (nodes - mean) ** 2) / np.sum(density))
    return middle + half * mean, half * half * variance


@dataclass(frozen=True)
class StudentT(Law):
    """Student t law of scale ``s`` (JCGM 101:2008, 6.4.9); its sigma is s sqrt(dof / (dof - 2))."""

    m: float
    s: float
    dof: float
    lower: float
    upper: float
    declared: bool = False
    shape: ClassVar[str] = "student_t"
    bounded: ClassVar[bool] = False

    @property
    def mean(self) -> float:  # noqa: D102
        return self.m

    @property
    def sigma(self) -> float:  # noqa: D102
        return self.s * math.sqrt(self.dof / (self.dof - 2.0))

    def quantile(self, u: Array) -> Array:  # noqa: D102
        return np.asarray(self.m + self.s * special.stdtrit(self.dof, u))

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return np.asarray(special.stdtr(self.dof, (x - self.m) / self.s), dtype=np.float64)

    def sf(self, x: Array) -> Array:  # noqa: D102
        return np.asarray(special.stdtr(self.dof, (self.m - x) / self.s), dtype=np.float64)

    def density(self, x: Array) -> Array:  # noqa: D102
        half = 0.5 * self.dof
        peak = math.exp(math.lgamma(half + 0.5) - math.lgamma(half)) / (math.sqrt(self.dof * math.pi) * self.s)
        return np.asarray(peak * (1.0 + ((x - self.m) / self.s) ** 2 / self.dof) ** (-half - 0.5))

    @property
    def standard(self) -> tuple[float, float]:  # noqa: D102
        return self.s, self.m

    def draw_standard(self, rng: np.random.Generator, out: Array) -> None:  # noqa: D102
        out[...] = rng.standard_t(self.dof, size=out.shape)

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (self.shape, self.dof)
