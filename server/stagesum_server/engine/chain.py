"""The chain: stages, error sources, the sites where it is evaluated, and the signal's deviation.

=========== ============ ===============================================================
symbol      shape        meaning
=========== ============ ===============================================================
G           (stages,)    nominal gains
v           (sites, stages + 1)  nominal signal at every node; v[:, 0] is the input
F           (stages,)    output spans, by which ``nonlinearity`` sources are multiplied
h           (sites,)     factor of a variable: law of its condition, ``times``, units
a, b, g     per stage    sums of input offsets, of output offsets with n F, of relative gain errors
d           per node     deviation of the built unit's signal from the nominal one, u - v
=========== ============ ===============================================================

A *site* is a place where the chain is evaluated: the operating points first, then the
calibration points. A *variable* is one random number of the model: a ``unit`` source has one for
all sites, a ``reading`` source one for each operating point and one for each calibration point.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING, Literal

import numpy as np

from stagesum_server.engine.laws import averaged

if TYPE_CHECKING:
    from numpy.typing import NDArray
    from stagesum_schemas.records import MonteCarloSpec

    from stagesum_server.engine.laws import Law

    Array = NDArray[np.float64]

Role = Literal["input_offset", "output_offset", "gain", "nonlinearity"]


@dataclass(frozen=True)
class Source:
    """One error source: its law in the data sheet's unit, and its factor at every site; ``owner`` is told in answers."""

    stage: int
    owner: str
    name: str
    effect: str
    role: Role
    law: Law
    factor: Array
    reading: str
    unit: str
    varies_by: str = "unit"
    dof: float | None = None


@dataclass(frozen=True)
class OperatingPoint:
    """An input value and a value of each condition."""

    input: float
    conditions: dict[str, float]


@dataclass(frozen=True)
class Calibration:
    """Weights of the calibration points' errors at every operating point; ``step`` is v(c2) - v(c1).

    ``weights`` has shape (points, calibration points); ``step`` is absent for one point (model.md, section 5).
    """

    weights: Array
    step: float | None
    readings: int


@dataclass(frozen=True)
class Limit:
    """Permitted error at each operating point, in the referred unit, and the yield to reach."""

    lower: Array
    upper: Array
    target: float
    by: tuple[str, ...]
    by_named: tuple[str, ...]


@dataclass(frozen=True)
class Correlation:
    """Coefficient of the Gaussian copula between two sources (indices); ``position`` is its place in the request."""

    first: int
    second: int
    coefficient: float
    position: int


@dataclass(frozen=True)
class Model:
    """Everything the methods need; built by intake, never changed."""

    title: str
    stages: tuple[str, ...]
    gains: Array
    nominal: Array
    spans: Array
    points: tuple[OperatingPoint, ...]
    sources: tuple[Source, ...]
    correlations: tuple[Correlation, ...]
    calibration: Calibration | None
    readings: int
    refer_to: str
    node: int
    unit: str
    span: float | None
    limit: Limit | None
    methods: tuple[str, ...]
    methods_named: bool
    coverage: float
    coverage_factor: float | None
    monte_carlo: MonteCarloSpec
    assumptions: tuple[str, ...]

    @cached_property
    def tail_gains(self) -> Array:
        """Gain from node i to the output, shape (stages + 1,); the last is 1."""
        return np.append(np.cumprod(self.gains[::-1])[::-1], 1.0)

    @property
    def referral(self) -> float:
        """Gain from the referred node to the output, by which output errors are divided."""
        return float(self.tail_gains[self.node])

    @cached_property
    def variables(self) -> tuple[Variable, ...]:
        """All random numbers of the model, in the order in which stages and sources stand."""
        return tuple(variable for index in range(len(self.sources)) for variable in _variables_of(self, index))


@dataclass(frozen=True)
class Variable:
    """One random number: the law of its draws, and its factor at every site.

    ``per_point`` variables are drawn anew at every operating point. ``single`` and ``readings`` tell
    the law of one reading and how many are averaged into ``law``.
    """

    source: int
    stage: int
    role: Role
    law: Law
    single: Law
    readings: int
    factor: Array
    per_point: bool
    reading: bool


def _variables_of(model: Model, index: int) -> list[Variable]:
    """Expand one source: one variable, or for a ``reading`` source one in use and one a calibration point."""
    source = model.sources[index]
    count = len(model.points)
    common = (index, source.stage, source.role)
    if source.varies_by == "unit":
        return [Variable(*common, source.law, source.law, 1, source.factor, per_point=False, reading=False)]
    sites = np.arange(source.factor.size)
    in_use = Variable(
        *common,
        averaged(source.law, model.readings),
        source.law,
        model.readings,
        np.where(sites < count, source.factor, 0.0),
        per_point=True,
        reading=True,
    )
    readings = model.calibration.readings if model.calibration else 1
    at_calibration = [
        Variable(
            *common,
            averaged(source.law, readings),
            source.law,
            readings,
            np.where(sites == site, source.factor, 0.0),
            per_point=False,
            reading=True,
        )
        for site in sites[count:]
        if source.factor[site] != 0.0
    ]
    return [in_use, *at_calibration]


def advance(d: Array, v: Array, gain: float, a: Array | float, g: Array | float, b: Array | float) -> Array:
    """Carry the deviation through one stage: d_i = G [(d + a)(1 + g) + v g] + b (model.md, section 1).

    Written for the deviation, not for the signal, so that small errors of large signals keep their digits.
    """
    t = d + a
    return gain * (t + (t + v) * g) + b


def calibrated(d: Array, model: Model) -> Array:
    """Errors at the referred node from output deviations at all sites; shapes (sites, ...) to (points, ...).

    Two points: r_cal - v = (d_p - w1 d_1 - w2 d_2) / (1 + (d_2 - d_1) / (v_2 - v_1)), which is the correction
    of model.md section 5 with the nominal part taken out.
    """
    count, calibration = len(model.points), model.calibration
    if calibration is None:
        return d / model.referral
    e = d[:count].copy()
    for k in range(calibration.weights.shape[1]):
        w = calibration.weights[:, k].reshape(-1, *[1] * (d.ndim - 1))
        e -= w * d[count + k]
    if calibration.step is not None:
        e /= 1.0 + (d[count + 1] - d[count]) / calibration.step
    return e / model.referral
