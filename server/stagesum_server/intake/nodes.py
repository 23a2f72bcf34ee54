"""Nodes of the chain: their units, nominal signals and spans; operating points and calibration sites."""

from __future__ import annotations

import itertools
import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from stagesum_schemas.pointers import member
from stagesum_schemas.units import DIMENSIONLESS, Unit, UnitError, absolute

from stagesum_server.engine.chain import OperatingPoint

if TYPE_CHECKING:
    from numpy.typing import NDArray
    from stagesum_schemas.records import BudgetRequest, ConditionSpec, StageSpec
    from stagesum_schemas.units import Quantity

    from stagesum_server.intake.faults import Faults

    Array = NDArray[np.float64]


@dataclass(frozen=True)
class Condition:
    """A condition in the unit of its nominal value."""

    unit: Unit
    nominal: float
    values: tuple[float, ...]


@dataclass(frozen=True)
class Frame:
    """The chain without its errors.

    ``units`` has a unit for every node, ``v`` (sites, stages + 1) the nominal signal, ``F`` (stages + 1,) the span
    of every node, ``offsets`` for each condition its difference from nominal at every site.
    """

    units: tuple[Unit, ...]
    gains: Array
    v: Array
    F: Array
    points: tuple[OperatingPoint, ...]
    conditions: dict[str, Condition]
    offsets: dict[str, Array]

    @property
    def sites(self) -> int:
        """Operating points and calibration points together."""
        return int(self.v.shape[0])


def frame(request: BudgetRequest, most_points: int, faults: Faults) -> Frame:
    """Resolve units, gains, points and calibration sites; refuses at once what nothing can be built on."""
    _refuse_repeated_names(request, faults)
    conditions = {name: _condition(name, spec, faults) for name, spec in request.conditions.items()}
    inputs = [
        _absolute(value, request.input.unit, f"#/input/values/{i}", faults)
        for i, value in enumerate(request.input.values)
    ]
    units, gains = _gains(request, faults)
    full_scales = _full_scales(request, units, faults)
    count = len(inputs) * math.prod(len(condition.values) for condition in conditions.values())
    if count > most_points:
        faults.add(
            "#/conditions",
            f"{count} operating points (inputs times condition values); at most {most_points} are computed",
        )
    faults.refuse()
    points = tuple(
        OperatingPoint(values[0], dict(zip(conditions, values[1:], strict=True)))
        for values in itertools.product(inputs, *(condition.values for condition in conditions.values()))
    )
    sites = points + _calibration_sites(request, conditions, faults)
    faults.refuse()
    v = _signals(np.array([site.input for site in sites]), gains)
    offsets = {
        name: np.array([site.conditions[name] - condition.nominal for site in sites])
        for name, condition in conditions.items()
    }
    return Frame(units, gains, v, _spans(v[: len(points)], gains, full_scales), points, conditions, offsets)


def _refuse_repeated_names(request: BudgetRequest, faults: Faults) -> None:
    stages = [stage.name for stage in request.stages]
    for i, stage in enumerate(request.stages):
        if stage.name in stages[:i]:
            faults.add(
                f"#/stages/{i}/name", f"a stage named {stage.name!r} stands before; every stage needs a name of its own"
            )
        if stage.name in ("input", "output", "calibration"):
            faults.add(f"#/stages/{i}/name", f"{stage.name!r} has a meaning of its own here; name the stage otherwise")
        names = [source.name for source in stage.sources]
        for j, name in enumerate(names):
            if name in names[:j]:
                faults.add(
                    f"#/stages/{i}/sources/{j}/name",
                    f"a source named {name!r} stands before in this stage; name each differently",
                )


def _absolute(value: Quantity, unit: Unit, pointer: str, faults: Faults) -> float:
    try:
        return absolute(value, unit)
    except UnitError as error:
        faults.add(pointer, str(error))
        return math.nan


def _condition(name: str, spec: ConditionSpec, faults: Faults) -> Condition:
    place = f"#/conditions/{member(name)}"
    unit = spec.nominal.unit or DIMENSIONLESS
    nominal = _absolute(spec.nominal, unit, f"{place}/nominal", faults)
    values = tuple(_absolute(value, unit, f"{place}/values/{i}", faults) for i, value in enumerate(spec.values))
    if len(set(values)) < len(values):
        faults.add(f"{place}/values", "a value stands twice; every value once is enough")
    return Condition(unit, nominal, values)


def _gains(request: BudgetRequest, faults: Faults) -> tuple[tuple[Unit, ...], Array]:
    """Units of all nodes and gains between them, each in output unit over input unit."""
    units, gains = [request.input.unit], []
    for i, stage in enumerate(request.stages):
        unit, gain = _gain(stage, units[-1], f"#/stages/{i}", faults)
        units.append(unit)
        gains.append(gain)
    return tuple(units), np.array(gains)


def _gain(stage: StageSpec, before: Unit, place: str, faults: Faults) -> tuple[Unit, float]:
    if stage.gain.is_rejection:
        faults.add(f"{place}/gain", f'found {stage.gain.text}; write the gain as a ratio, such as 10 or "10 V/V"')
        return before, math.nan
    made = before * (stage.gain.unit or DIMENSIONLESS)
    unit = stage.unit or made.tidy()
    if stage.gain.value == 0.0:
        faults.add(f"{place}/gain", "gain 0 lets nothing through; it must differ from zero")
    try:
        return unit, stage.gain.value * made.factor_to(unit)
    except UnitError:
        faults.add(
            f"{place}/unit",
            f"a gain of {stage.gain.text} makes {made.symbol or 'a plain number'} of {before.symbol or 'a plain number'}, "
            f"which is not of the kind of {unit.symbol}; correct the gain's unit or the stage's",
        )
        return unit, math.nan


def _full_scales(request: BudgetRequest, units: tuple[Unit, ...], faults: Faults) -> list[float | None]:
    """Stated spans of all nodes, in the nodes' units."""
    stated = [(request.input.full_scale, "#/input/full_scale")]
    stated += [(stage.full_scale, f"#/stages/{i}/full_scale") for i, stage in enumerate(request.stages)]
    return [
        None if quantity is None else positive(quantity, unit, pointer, faults)
        for (quantity, pointer), unit in zip(stated, units, strict=True)
    ]


def positive(quantity: Quantity, unit: Unit, pointer: str, faults: Faults) -> float:
    """Give a quantity in ``unit``; a fault where the units differ in kind or it isn't above zero."""
    value = in_unit(quantity, unit, pointer, faults)
    if value <= 0.0:
        faults.add(pointer, f"found {quantity.text}; it must be above zero")
    return value


def in_unit(quantity: Quantity, unit: Unit, pointer: str, faults: Faults) -> float:
    """Give a quantity in ``unit``; a plain number is in it already, another kind is a fault."""
    if quantity.is_rejection:
        faults.add(
            pointer,
            f"found {quantity.text}; a figure in dB has no meaning here, give it in {unit.symbol or 'a plain number'}",
        )
        return math.nan
    if quantity.unit is None:
        return quantity.value
    try:
        return quantity.value * quantity.unit.factor_to(unit)
    except UnitError:
        faults.add(
            pointer,
            f"found {quantity.text}, which is not of the kind of {unit.symbol or 'a plain number (%, ppm)'}; "
            f"give it in {unit.symbol or 'a fraction, % or ppm'}",
        )
        return math.nan


def _calibration_sites(
    request: BudgetRequest, conditions: dict[str, Condition], faults: Faults
) -> tuple[OperatingPoint, ...]:
    if request.calibration is None:
        return ()
    sites = []
    for k, point in enumerate(request.calibration.points):
        place = f"#/calibration/points/{k}"
        values = {name: condition.nominal for name, condition in conditions.items()}
        for name, quantity in point.conditions.items():
            pointer = f"{place}/conditions/{member(name)}"
            if name in conditions:
                values[name] = _absolute(quantity, conditions[name].unit, pointer, faults)
            else:
                faults.add(pointer, f"no condition is named {name!r}; known: {known(conditions)}")
        sites.append(OperatingPoint(_absolute(point.input, request.input.unit, f"{place}/input", faults), values))
    if len(sites) == 2 and sites[0].input == sites[1].input:
        faults.add(
            "#/calibration/points/1/input",
            f"both calibration points are at {sites[0].input:g}; a line needs two different inputs",
        )
    return tuple(sites)


def known(names: dict[str, Condition]) -> str:
    """Names in a sentence."""
    return ", ".join(names) or "none"


def _signals(x: Array, gains: Array) -> Array:
    """Nominal signals v_i = G_i v_(i-1); shape (sites, stages + 1)."""
    return np.stack([x * gain for gain in np.concatenate([[1.0], np.cumprod(gains)])], axis=1)


def _spans(v: Array, gains: Array, stated: list[float | None]) -> Array:
    """Span of every node: as stated, else that of the input carried through, else max - min of the signal."""
    x = v[:, 0]
    span = stated[0] if stated[0] is not None else float(x.max() - x.min())
    spans = span * np.abs(np.concatenate([[1.0], np.cumprod(gains)]))
    return np.array([span if given is None else given for given, span in zip(stated, spans, strict=True)])
