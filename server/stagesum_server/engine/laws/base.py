"""What a probability law answers, and helpers of the normal law.

=========== =====================================================
symbol      meaning
=========== =====================================================
lower,upper worst-case bounds of the source
m, s        centre and scale of a parent normal (or Student t)
u           probability, 0 < u < 1
z           standard normal score
=========== =====================================================
"""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from typing import TYPE_CHECKING, ClassVar

import numpy as np
from scipy import special

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

SQRT_2PI = math.sqrt(2.0 * math.pi)
FAMILY_TOLERANCE = 1e-9  # shape parameters closer than this are taken as equal
CLOSE = 0.5  # an interval narrower than this (in sigmas) is integrated: a difference of two Phi would lose digits
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(12)


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

    @abstractmethod
    def cdf(self, x: Array) -> Array:
        """Probability of values up to and including x, with relative accuracy where it is small."""

    @abstractmethod
    def sf(self, x: Array) -> Array:
        """Probability of values above x, with relative accuracy where it is small."""

    @abstractmethod
    def density(self, x: Array) -> Array:
        """Probability density; zero outside the support."""

    def from_scores(self, z: Array) -> Array:
        """Map standard normal scores to values of this law: Q(Phi(z)), the step of a Gaussian copula."""
        return self.quantile(special.ndtr(z))

    def draw(self, rng: np.random.Generator, out: Array) -> None:
        """Fill ``out`` with independent draws."""
        self.draw_standard(rng, out)
        size, offset = self.standard
        if size != 1.0:
            out *= size
        if offset != 0.0:
            out += offset

    @property
    def standard(self) -> tuple[float, float]:
        """Size and offset that turn a standard draw into the law's."""
        return 1.0, 0.0

    def draw_standard(self, rng: np.random.Generator, out: Array) -> None:
        """Fill ``out`` with draws of a standard form, which its user scales and shifts (see ``standard``)."""
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


def normal_density(z: float) -> float:
    """Density of the standard normal law."""
    return math.exp(-0.5 * z * z) / SQRT_2PI


def normal_content(low: Array | float, high: Array | float) -> Array:
    """Probability that a standard normal value lies in [low, high], with relative accuracy, also far out."""
    low, high = np.broadcast_arrays(np.asarray(low, dtype=np.float64), np.asarray(high, dtype=np.float64))
    flip = low > 0.0
    below, above = np.where(flip, -high, low), np.where(flip, -low, high)
    wide = special.ndtr(above) - special.ndtr(below)
    if not np.any(high - low < CLOSE):
        return np.asarray(wide)
    with np.errstate(invalid="ignore", over="ignore"):
        middle, half = 0.5 * (below + above), 0.5 * (above - below)
        z = middle[..., None] + half[..., None] * _NODES
        narrow = half * np.sum(_WEIGHTS * np.exp(-0.5 * z * z), axis=-1) / SQRT_2PI
    return np.where(high - low < CLOSE, narrow, wide)
