"""The mean of several readings."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from stagesum_server.engine.laws.base import Law
from stagesum_server.engine.laws.normal import Normal, StudentT, TruncatedNormal

if TYPE_CHECKING:
    from stagesum_server.engine.laws.base import Array

AVERAGED_BY_DRAWS = 16  # up to so many readings are drawn one by one; beyond, the mean is taken as normal


class Averaged(Law):
    """Mean of a few independent draws of another law, drawn one by one."""

    def __init__(self, single: Law, readings: int, lower: float, upper: float) -> None:
        self.single, self.readings = single, readings
        self.shape = single.shape  # type: ignore[misc]  # the shape told back is that of the single reading
        self.bounded = single.bounded  # type: ignore[misc]
        self.lower, self.upper = lower, upper

    @property
    def mean(self) -> float:  # noqa: D102 - said by Law, as below
        return self.single.mean

    @property
    def sigma(self) -> float:  # noqa: D102
        return self.single.sigma / math.sqrt(self.readings)

    def quantile(self, u: Array) -> Array:
        """Not known in closed form: an averaged reading is drawn, never mapped."""
        raise NotImplementedError

    def cdf(self, x: Array) -> Array:
        """Not known in closed form: ``convolution`` takes the readings one by one."""
        raise NotImplementedError

    sf = density = cdf

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


def averaged(law: Law, readings: int) -> Law:
    """Return the law of the mean of ``readings`` independent draws.

    A bounded law keeps its bounds, and so does a limit that a data sheet states; bounds that are so many sigmas
    shrink with sigma. Beyond ``AVERAGED_BY_DRAWS`` readings a bounded law's mean is taken as a normal law of
    sigma / sqrt(readings), cut at the bounds.
    """
    if readings == 1:
        return law
    shrink = 1.0 / math.sqrt(readings)
    sigma = law.sigma * shrink
    if isinstance(law, Normal):
        bounds = (law.lower, law.upper) if law.declared else _shrunk(law, shrink)
        return Normal(law.m, sigma, *bounds, law.declared)
    if isinstance(law, StudentT):
        bounds = (law.lower, law.upper) if law.declared else _shrunk(law, shrink)
        if readings <= AVERAGED_BY_DRAWS:
            return Averaged(law, readings, *bounds)
        return Normal(law.m, sigma, *bounds, law.declared)
    if readings <= AVERAGED_BY_DRAWS:
        return Averaged(law, readings, law.lower, law.upper)
    return TruncatedNormal(law.mean, sigma, law.lower, law.upper)


def _shrunk(law: Law, factor: float) -> tuple[float, float]:
    return law.mean + (law.lower - law.mean) * factor, law.mean + (law.upper - law.mean) * factor
