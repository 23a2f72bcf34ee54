"""Probability laws of error sources.

A law is an object that answers its mean, standard deviation, support and worst-case bounds, draws
values, and maps probabilities and normal scores to values. A new shape is one class here and one
line in ``reading.SHAPES``.

=========== =====================================================
symbol      meaning
=========== =====================================================
lower,upper worst-case bounds of the source
mu, sigma   mean and standard deviation of the law itself
m, s        centre and scale of a parent normal (or Student t)
u           probability, 0 < u < 1
z           standard normal score
=========== =====================================================
"""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, ClassVar

import numpy as np
from scipy import special

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

AVERAGED_BY_DRAWS = 16  # up to so many readings are drawn one by one; beyond, the mean is taken as normal
SQRT_2PI = math.sqrt(2.0 * math.pi)


def normal_density(z: float) -> float:
    """Density of the standard normal law."""
    return math.exp(-0.5 * z * z) / SQRT_2PI


def normal_content(low: float, high: float) -> float:
    """Probability that a standard normal value lies in [low, high], without cancellation in the tails."""
    if low > 0.0:
        low, high = -high, -low
    return float(special.ndtr(high) - special.ndtr(low))


class Law(ABC):
    """One source's distribution. ``lower`` and ``upper`` are its worst-case bounds."""

    shape: ClassVar[str]
    bounded: ClassVar[bool] = True  # no value lies outside the bounds

    lower: float
    upper: float

    @property
    @abstractmethod
    def mean(self) -> float:
        """Mean of the law."""

    @property
    @abstractmethod
    def sigma(self) -> float:
        """Standard deviation of the law."""

    @abstractmethod
    def quantile(self, u: Array) -> Array:
        """Values below which the law lies with probability ``u``; any shape of array."""

    def from_scores(self, z: Array) -> Array:
        """Map standard normal scores to values of this law: Q(Phi(z)), the step of a Gaussian copula."""
        return self.quantile(special.ndtr(z))

    def draw(self, rng: np.random.Generator, out: Array) -> None:
        """Fill ``out`` with independent draws."""
        rng.random(out=out)
        out[...] = self.quantile(out)

    @property
    def symmetric(self) -> bool:
        """Whether the law is its own mirror image about its mean."""
        return True

    @property
    def kinks(self) -> tuple[float, ...]:
        """Probabilities at which the quantile function jumps or bends."""
        return ()

    @property
    def family(self) -> tuple[object, ...]:
        """What is left of the law when location and scale are taken away (see ``correlation``).

        Two laws of one family are images of each other under ``x -> a + b x``, b > 0.
        """
        return (self.shape,)

    def averaged(self, readings: int) -> Law:
        """Return the law of the mean of ``readings`` independent draws.

        A bounded law keeps its bounds. Beyond ``AVERAGED_BY_DRAWS`` readings the mean is taken as a
        normal law of sigma / sqrt(readings), cut at the bounds.
        """
        if readings == 1:
            return self
        if readings <= AVERAGED_BY_DRAWS:
            return Averaged(self, readings)
        return TruncatedNormal(self.mean, self.sigma / math.sqrt(readings), self.lower, self.upper)


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
    def mean(self) -> float:  # noqa: D102 - said by Law
        return self.m

    @property
    def sigma(self) -> float:  # noqa: D102
        return self.s

    def quantile(self, u: Array) -> Array:  # noqa: D102
        return self.m + self.s * special.ndtri(u)

    def from_scores(self, z: Array) -> Array:  # noqa: D102
        return self.m + self.s * z

    def draw(self, rng: np.random.Generator, out: Array) -> None:  # noqa: D102
        rng.standard_normal(out=out)
        _scale(out, self.s, self.m)

    def averaged(self, readings: int) -> Law:  # noqa: D102
        shrink = 1.0 / math.sqrt(readings)
        bound_shrink = 1.0 if self.declared else shrink
        return Normal(
            self.m,
            self.s * shrink,
            self.m + (self.lower - self.m) * bound_shrink,
            self.m + (self.upper - self.m) * bound_shrink,
            self.declared,
        )


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
        return normal_content(*self.cuts)

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

    def draw(self, rng: np.random.Generator, out: Array) -> None:
        """Fill ``out``: by rejection where the cuts leave most of the parent, else by the quantile."""
        if self.content < REJECTION_CONTENT:
            super().draw(rng, out)
            return
        low, high = self.cuts
        rng.standard_normal(out=out)
        outside = np.flatnonzero((out < low) | (out > high))
        while outside.size:
            again = rng.standard_normal(outside.size)
            out[outside] = again
            outside = outside[(again < low) | (again > high)]
        _scale(out, self.s, self.m)

    @property
    def symmetric(self) -> bool:  # noqa: D102
        return abs(self.cuts[0] + self.cuts[1]) < FAMILY_TOLERANCE

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (self.shape, *(round(cut, 9) for cut in self.cuts))


FAMILY_TOLERANCE = 1e-9  # shape parameters closer than this are taken as equal
WIDE_PARENT = 1.0  # cuts closer than this (in sigmas): the closed form of the variance cancels, quadrature does not
REJECTION_CONTENT = 0.6  # below this share, drawing again costs more than one quantile


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
class Uniform(Law):
    """Uniform law between the bounds (JCGM 100:2008, 4.3.7)."""

    lower: float
    upper: float
    shape: ClassVar[str] = "uniform"

    @property
    def mean(self) -> float:  # noqa: D102
        return 0.5 * (self.lower + self.upper)

    @property
    def sigma(self) -> float:  # noqa: D102
        return (self.upper - self.lower) / math.sqrt(12.0)

    def quantile(self, u: Array) -> Array:  # noqa: D102
        return self.lower + (self.upper - self.lower) * u

    def draw(self, rng: np.random.Generator, out: Array) -> None:  # noqa: D102
        rng.random(out=out)
        _scale(out, self.upper - self.lower, self.lower)


@dataclass(frozen=True)
class Triangular(Law):
    """Triangular law with its peak at ``mode`` (JCGM 100:2008, 4.3.9, where the peak is in the middle)."""

    lower: float
    upper: float
    mode: float
    shape: ClassVar[str] = "triangular"

    @property
    def mean(self) -> float:  # noqa: D102
        return (self.lower + self.upper + self.mode) / 3.0

    @property
    def sigma(self) -> float:  # noqa: D102
        left, right = self.mode - self.lower, self.upper - self.mode
        return math.sqrt((left * left + left * right + right * right) / 18.0)

    def quantile(self, u: Array) -> Array:  # noqa: D102
        width, left, right = self.upper - self.lower, self.mode - self.lower, self.upper - self.mode
        return np.where(
            u * width < left,
            self.lower + np.sqrt(u * width * left),
            self.upper - np.sqrt((1.0 - u) * width * right),
        )

    @property
    def _peak(self) -> float:
        """Where the peak is, as a share of the width; it is also the probability below the peak."""
        return (self.mode - self.lower) / (self.upper - self.lower)

    @property
    def symmetric(self) -> bool:  # noqa: D102
        return abs(self._peak - 0.5) < FAMILY_TOLERANCE

    @property
    def kinks(self) -> tuple[float, ...]:  # noqa: D102
        return (self._peak,)

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (self.shape, round(self._peak, 9))


@dataclass(frozen=True)
class Trapezoidal(Law):
    """Symmetric trapezoidal law; ``top_ratio`` is top over base (beta of JCGM 100:2008, 4.3.9)."""

    lower: float
    upper: float
    top_ratio: float
    shape: ClassVar[str] = "trapezoidal"

    @property
    def mean(self) -> float:  # noqa: D102
        return 0.5 * (self.lower + self.upper)

    @property
    def sigma(self) -> float:  # noqa: D102
        return 0.5 * (self.upper - self.lower) * math.sqrt((1.0 + self.top_ratio**2) / 6.0)

    def quantile(self, u: Array) -> Array:  # noqa: D102
        b, ramp = self.top_ratio, self._ramp
        near = np.minimum(u, 1.0 - u)
        # distance from the nearer end, as a share of the half-width
        on_side = np.sqrt(2.0 * near * (1.0 - b * b))
        on_top = (1.0 - b) + (near - ramp) * (1.0 + b)
        distance = 0.5 * (self.upper - self.lower) * np.where(near < ramp, on_side, on_top)
        return np.where(u < 0.5, self.lower + distance, self.upper - distance)

    @property
    def _ramp(self) -> float:
        """Probability under one sloping side."""
        return 0.5 * (1.0 - self.top_ratio) / (1.0 + self.top_ratio)

    @property
    def kinks(self) -> tuple[float, ...]:  # noqa: D102
        return (self._ramp, 1.0 - self._ramp)

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (self.shape, self.top_ratio)


@dataclass(frozen=True)
class Arcsine(Law):
    """Arcsine law: a sine of unknown phase (JCGM 101:2008, 6.4.6)."""

    lower: float
    upper: float
    shape: ClassVar[str] = "arcsine"

    @property
    def mean(self) -> float:  # noqa: D102
        return 0.5 * (self.lower + self.upper)

    @property
    def sigma(self) -> float:  # noqa: D102
        return 0.5 * (self.upper - self.lower) / math.sqrt(2.0)

    def quantile(self, u: Array) -> Array:  # noqa: D102
        return np.asarray(self.mean - 0.5 * (self.upper - self.lower) * np.cos(math.pi * u))


@dataclass(frozen=True)
class TwoPoint(Law):
    """Either bound, the upper one with probability ``p_upper``."""

    lower: float
    upper: float
    p_upper: float = 0.5
    shape: ClassVar[str] = "two_point"

    @property
    def mean(self) -> float:  # noqa: D102
        return self.lower + self.p_upper * (self.upper - self.lower)

    @property
    def sigma(self) -> float:  # noqa: D102
        return (self.upper - self.lower) * math.sqrt(self.p_upper * (1.0 - self.p_upper))

    def quantile(self, u: Array) -> Array:  # noqa: D102
        return np.where(u < 1.0 - self.p_upper, self.lower, self.upper)

    @property
    def symmetric(self) -> bool:  # noqa: D102
        return self.p_upper == 0.5

    @property
    def kinks(self) -> tuple[float, ...]:  # noqa: D102
        return (1.0 - self.p_upper,)

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (self.shape, self.p_upper)


@dataclass(frozen=True)
class StudentT(Law):
    """Student t law of scale ``s`` (JCGM 101:2008, 6.4.9); its sigma is s sqrt(dof / (dof - 2))."""

    m: float
    s: float
    dof: float
    lower: float
    upper: float
    shape: ClassVar[str] = "student_t"
    bounded: ClassVar[bool] = False

    @property
    def mean(self) -> float:  # noqa: D102
        return self.m

    @property
    def sigma(self) -> float:  # noqa: D102
        return self.s * math.sqrt(self.dof / (self.dof - 2.0))

    def quantile(self, u: Array) -> Array:  # noqa: D102
        return self.m + self.s * special.stdtrit(self.dof, u)

    def draw(self, rng: np.random.Generator, out: Array) -> None:  # noqa: D102
        out[...] = rng.standard_t(self.dof, size=out.shape)
        _scale(out, self.s, self.m)

    def averaged(self, readings: int) -> Law:
        """Return the law of the mean; its worst-case bounds shrink with sigma, as they are so many sigmas."""
        shrink = 1.0 / math.sqrt(readings)
        lower, upper = (self.m + (bound - self.m) * shrink for bound in (self.lower, self.upper))
        if readings <= AVERAGED_BY_DRAWS:
            return Averaged(self, readings, lower, upper)
        return Normal(self.m, self.sigma * shrink, lower, upper)

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (self.shape, self.dof)


class Samples(Law):
    """Empirical law of measured values, linear between order statistics: n - 1 uniform pieces of equal weight."""

    shape: ClassVar[str] = "samples"

    def __init__(self, values: Array) -> None:
        self.values = np.sort(values)
        self.lower, self.upper = float(self.values[0]), float(self.values[-1])
        # deviations from the middle: the moments of values far from zero keep their digits
        middle = 0.5 * (self.lower + self.upper)
        low, high = self.values[:-1] - middle, self.values[1:] - middle
        offset = float(np.mean(0.5 * (low + high)))
        self._mean = middle + offset
        low, high = low - offset, high - offset
        self._sigma = math.sqrt(float(np.mean((low * low + low * high + high * high) / 3.0)))

    @property
    def mean(self) -> float:  # noqa: D102
        return self._mean

    @property
    def sigma(self) -> float:  # noqa: D102
        return self._sigma

    def quantile(self, u: Array) -> Array:  # noqa: D102
        position = u * (self.values.size - 1)
        left = np.minimum(position.astype(np.intp), self.values.size - 2)
        start = self.values[left]
        return start + (position - left) * (self.values[left + 1] - start)

    @property
    def symmetric(self) -> bool:  # noqa: D102
        return False

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (self.shape, id(self.values))


class Averaged(Law):
    """Mean of a few independent draws of another law, drawn one by one."""

    def __init__(self, single: Law, readings: int, lower: float | None = None, upper: float | None = None) -> None:
        self.single, self.readings = single, readings
        self.shape = single.shape  # type: ignore[misc]  # the shape told back is that of the single reading
        self.bounded = single.bounded  # type: ignore[misc]
        self.lower = single.lower if lower is None else lower
        self.upper = single.upper if upper is None else upper

    @property
    def mean(self) -> float:  # noqa: D102
        return self.single.mean

    @property
    def sigma(self) -> float:  # noqa: D102
        return self.single.sigma / math.sqrt(self.readings)

    def quantile(self, u: Array) -> Array:
        """Not known in closed form: an averaged reading is drawn, never mapped."""
        raise NotImplementedError

    def draw(self, rng: np.random.Generator, out: Array) -> None:  # noqa: D102
        self.single.draw(rng, out)
        part = np.empty_like(out)
        for _ in range(self.readings - 1):
            self.single.draw(rng, part)
            out += part
        out /= self.readings

    @property
    def symmetric(self) -> bool:  # noqa: D102
        return self.single.symmetric

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (*self.single.family, self.readings)


def _scale(out: Array, factor: float, offset: float) -> None:
    """Replace ``out`` by ``offset + factor * out``."""
    out *= factor
    if offset != 0.0:
        out += offset
