"""Laws between two bounds, and the empirical law of measured values."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar

import numpy as np

from stagesum_server.engine.laws.base import FAMILY_TOLERANCE, Law

if TYPE_CHECKING:
    from stagesum_server.engine.laws.base import Array


@dataclass(frozen=True)
class Uniform(Law):
    """Uniform law between the bounds (JCGM 100:2008, 4.3.7)."""

    lower: float
    upper: float
    shape: ClassVar[str] = "uniform"

    @property
    def mean(self) -> float:  # noqa: D102 - said by Law, as below
        return 0.5 * (self.lower + self.upper)

    @property
    def sigma(self) -> float:  # noqa: D102
        return (self.upper - self.lower) / math.sqrt(12.0)

    def quantile(self, u: Array) -> Array:  # noqa: D102
        return self.lower + (self.upper - self.lower) * u

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return np.clip((x - self.lower) / (self.upper - self.lower), 0.0, 1.0)

    def sf(self, x: Array) -> Array:  # noqa: D102
        return np.clip((self.upper - x) / (self.upper - self.lower), 0.0, 1.0)

    def density(self, x: Array) -> Array:  # noqa: D102
        return np.where((x >= self.lower) & (x <= self.upper), 1.0 / (self.upper - self.lower), 0.0)

    @property
    def standard(self) -> tuple[float, float]:  # noqa: D102
        return self.upper - self.lower, self.lower

    def draw_standard(self, rng: np.random.Generator, out: Array) -> None:  # noqa: D102
        rng.random(out=out)


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

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return np.where(x < self.mode, self._left(x), 1.0 - self._right(x))

    def sf(self, x: Array) -> Array:  # noqa: D102
        return np.where(x < self.mode, 1.0 - self._left(x), self._right(x))

    def _left(self, x: Array) -> Array:
        """Probability below x, left of the peak."""
        area = (self.upper - self.lower) * max(self.mode - self.lower, 1e-300)
        return np.clip(x - self.lower, 0.0, None) ** 2 / area

    def _right(self, x: Array) -> Array:
        """Probability above x, right of the peak."""
        area = (self.upper - self.lower) * max(self.upper - self.mode, 1e-300)
        return np.clip(self.upper - x, 0.0, None) ** 2 / area

    def density(self, x: Array) -> Array:  # noqa: D102
        width = self.upper - self.lower
        left = 2.0 * (x - self.lower) / (width * max(self.mode - self.lower, 1e-300))
        right = 2.0 * (self.upper - x) / (width * max(self.upper - self.mode, 1e-300))
        inside = (x >= self.lower) & (x <= self.upper)
        return np.where(inside, np.where(x < self.mode, left, right), 0.0)

    @property
    def peak(self) -> float:
        """Where the peak is, as a share of the width; it is also the probability below the peak."""
        return (self.mode - self.lower) / (self.upper - self.lower)

    @property
    def symmetric(self) -> bool:  # noqa: D102
        return abs(self.peak - 0.5) < FAMILY_TOLERANCE

    @property
    def kinks(self) -> tuple[float, ...]:  # noqa: D102
        return (self.peak,)

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (self.shape, round(self.peak, 9))


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

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return np.where(x < self.mean, self._near(x - self.lower), 1.0 - self._near(self.upper - x))

    def sf(self, x: Array) -> Array:  # noqa: D102
        return np.where(x < self.mean, 1.0 - self._near(x - self.lower), self._near(self.upper - x))

    def _near(self, distance: Array) -> Array:
        """Probability within ``distance`` of an end, up to the middle."""
        b = self.top_ratio
        d = np.maximum(distance, 0.0) / (0.5 * (self.upper - self.lower))
        on_side = d * d / (2.0 * max(1.0 - b * b, 1e-300))
        return np.where(d < 1.0 - b, on_side, self._ramp + (d - (1.0 - b)) / (1.0 + b))

    def density(self, x: Array) -> Array:  # noqa: D102
        b, half = self.top_ratio, 0.5 * (self.upper - self.lower)
        d = np.minimum(x - self.lower, self.upper - x) / half
        top = 1.0 / (half * (1.0 + b))
        return np.where(d < 0.0, 0.0, top * np.minimum(1.0, d / max(1.0 - b, 1e-300)))

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

    def cdf(self, x: Array) -> Array:  # noqa: D102
        share = np.clip((x - self.lower) / (self.upper - self.lower), 0.0, 1.0)
        return np.asarray(2.0 / math.pi * np.arcsin(np.sqrt(share)))

    def sf(self, x: Array) -> Array:  # noqa: D102
        share = np.clip((self.upper - x) / (self.upper - self.lower), 0.0, 1.0)
        return np.asarray(2.0 / math.pi * np.arcsin(np.sqrt(share)))

    def density(self, x: Array) -> Array:  # noqa: D102
        product = (x - self.lower) * (self.upper - x)
        with np.errstate(divide="ignore", invalid="ignore"):
            return np.where(product > 0.0, 1.0 / (math.pi * np.sqrt(np.abs(product))), 0.0)


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

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return np.where(x < self.lower, 0.0, np.where(x < self.upper, 1.0 - self.p_upper, 1.0))

    def sf(self, x: Array) -> Array:  # noqa: D102
        return np.where(x < self.lower, 1.0, np.where(x < self.upper, self.p_upper, 0.0))

    def density(self, x: Array) -> Array:
        """Two atoms have no density: refused."""
        raise NotImplementedError

    @property
    def symmetric(self) -> bool:  # noqa: D102
        return self.p_upper == 0.5

    @property
    def kinks(self) -> tuple[float, ...]:  # noqa: D102
        return (1.0 - self.p_upper,)

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (self.shape, self.p_upper)


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
        return np.asarray(start + (position - left) * (self.values[left + 1] - start))

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return self._below(self.values, np.asarray(x, dtype=np.float64), "right")

    def sf(self, x: Array) -> Array:  # noqa: D102
        return self._below(-self.values[::-1], -np.asarray(x, dtype=np.float64), "left")

    def _below(self, values: Array, x: Array, side: str) -> Array:
        """Probability up to x of the pieces between sorted values; equal values make a jump at x (side right)."""
        right = np.searchsorted(values, x, side="right" if side == "right" else "left")
        inner = np.clip(right, 1, values.size - 1)
        start, width = values[inner - 1], values[inner] - values[inner - 1]
        with np.errstate(divide="ignore", invalid="ignore"):
            share = np.where(width > 0.0, (x - start) / width, 0.0)
        F = (inner - 1 + share) / (values.size - 1)
        return np.where(right == 0, 0.0, np.where(right == values.size, 1.0, F))

    def density(self, x: Array) -> Array:  # noqa: D102
        right = np.searchsorted(self.values, x, side="right")
        inner = np.clip(right, 1, self.values.size - 1)
        width = self.values[inner] - self.values[inner - 1]
        inside = (x >= self.lower) & (x <= self.upper)
        with np.errstate(divide="ignore"):
            return np.where(inside, 1.0 / (width * (self.values.size - 1)), 0.0)

    @property
    def symmetric(self) -> bool:  # noqa: D102
        return False

    @property
    def kinks(self) -> tuple[float, ...]:  # noqa: D102
        return tuple(np.linspace(0.0, 1.0, self.values.size)[1:-1].tolist())

    @property
    def family(self) -> tuple[object, ...]:  # noqa: D102
        return (self.shape, id(self.values))
