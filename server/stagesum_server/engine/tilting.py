"""Exponentially tilted laws: density proportional to f(x) exp(tau x), for drawing where errors are large."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING, Protocol

import numpy as np

from stagesum_server.engine import laws

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]


class Draws(Protocol):
    """Something that fills an array with independent draws."""

    def draw(self, rng: np.random.Generator, out: Array) -> None:
        """Fill ``out``."""


@dataclass(frozen=True)
class TiltedUniform:
    """Uniform law between two bounds, tilted: an exponential law cut at both."""

    lower: float
    upper: float
    tau: float

    def draw(self, rng: np.random.Generator, out: Array) -> None:
        """Fill ``out`` by the quantile, from the end where the density is largest."""
        rng.random(out=out)
        width, rate = self.upper - self.lower, abs(self.tau)
        if rate * width < 1e-12:
            out *= width
        else:
            # distance from the heavy end: -log(u + (1 - u) exp(-rate width)) / rate
            out += (1.0 - out) * math.exp(-rate * width)
            np.log(out, out=out)
            out /= -rate
        if self.tau > 0.0:
            np.subtract(self.upper, out, out=out)
        else:
            out += self.lower


@dataclass(frozen=True)
class TiltedSum:
    """Sum of independent draws, each times ``share``."""

    parts: tuple[Draws, ...]
    share: float

    def draw(self, rng: np.random.Generator, out: Array) -> None:
        """Fill ``out`` with sums."""
        self.parts[0].draw(rng, out)
        part = np.empty_like(out)
        for more in self.parts[1:]:
            more.draw(rng, part)
            out += part
        out *= self.share


def tilted(law: laws.Law, tau: float) -> Draws | None:
    """The law tilted by ``tau``, or None where it is drawn untilted (the estimate is unbiased all the same)."""
    match law:
        case laws.Normal():
            return laws.Normal(law.m + tau * law.s**2, law.s, law.lower, law.upper)
        case laws.TruncatedNormal():
            return laws.TruncatedNormal(law.m + tau * law.s**2, law.s, law.lower, law.upper)
        case laws.Uniform():
            return TiltedUniform(law.lower, law.upper, tau)
        case laws.Triangular() if law.symmetric:
            half = TiltedUniform(0.5 * law.lower, 0.5 * law.upper, tau)
            return TiltedSum((half, half), 1.0)
        case laws.Trapezoidal():
            return _tilted_trapezoid(law, tau)
        case laws.TwoPoint():
            odds = law.p_upper / (1.0 - law.p_upper) * math.exp(tau * (law.upper - law.lower))
            return laws.TwoPoint(law.lower, law.upper, odds / (1.0 + odds))
        case laws.Averaged():
            single = tilted(law.single, tau / law.readings)
            return None if single is None else TiltedSum((single,) * law.readings, 1.0 / law.readings)
    return None


def _tilted_trapezoid(law: laws.Trapezoidal, tau: float) -> TiltedSum:
    """A symmetric trapezoid is the sum of two uniform laws."""
    middle, half = 0.5 * (law.lower + law.upper), 0.5 * (law.upper - law.lower)
    wide, narrow = 0.5 * (1.0 + law.top_ratio) * half, 0.5 * (1.0 - law.top_ratio) * half
    return TiltedSum((TiltedUniform(middle - wide, middle + wide, tau), TiltedUniform(-narrow, narrow, tau)), 1.0)
