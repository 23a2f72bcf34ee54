"""Error sources: units close, figures are read, factors at every site are worked out."""

from __future__ import annotations

import math
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from stagesum_schemas.units import DIMENSIONLESS, Unit, UnitError

from stagesum_server.engine.chain import Role, Source
from stagesum_server.engine.reading import Figures, UnreadableError, read
from stagesum_server.intake.nodes import known

if TYPE_CHECKING:
    from numpy.typing import NDArray
    from stagesum_schemas.records import LawSpec, RulesSpec, SourceSpec, StandardSpec
    from stagesum_schemas.units import Quantity

    from stagesum_server.engine.reading import Reading
    from stagesum_server.intake.assumptions import Assumptions
    from stagesum_server.intake.faults import Faults
    from stagesum_server.intake.nodes import Frame

    Array = NDArray[np.float64]

FARTHEST_DB = 600.0  # ratios of 1e-30 to 1e30, the sizes that any other figure may have
LAW_POWER = {"linear": 1, "sqrt": 0.5, "square": 2}


@dataclass(frozen=True)
class _Place:
    """Where a source acts: the unit its effect must come out in, and the factor that stands beside its figures."""

    unit: Unit
    beside: Unit
    factor: Array

    @property
    def coherent(self) -> Unit:
        """Unit of a figure that closes: place unit over what stands beside it."""
        return self.unit / self.beside


def source(
    spec: SourceSpec,
    frame: Frame,
    stage: int,
    owner: str,
    rules: RulesSpec,
    pointer: str,
    faults: Faults,
    told: Assumptions,
) -> Source | None:
    """Make the engine's source of one data sheet line; None where it has a fault (noted)."""
    before = len(faults.found)
    place = _place(spec, frame, stage, pointer, faults)
    if len(faults.found) > before:
        return None
    try:
        found = _read(spec, place.coherent, rules, f"{owner}/{spec.name}", pointer, faults, told)
        if found is None:
            return None
        reading, unit = found
        factor = place.factor * (unit * place.beside).factor_to(place.unit)
    except UnitError as error:  # each unit can be carried, their product can't
        faults.add(pointer, str(error))
        return None
    if spec.effect == "nonlinearity":
        _refuse_no_span(frame, stage, pointer, faults)
        factor[len(frame.points) :] = 0.0  # a calibration doesn't see it: it is what a straight line leaves
    told_back = (reading.law, factor, reading.sentence, unit.symbol, spec.varies_by, spec.dof)
    return Source(stage, owner, spec.name, spec.effect, _role(spec), *told_back)


def _role(spec: SourceSpec) -> Role:
    if spec.effect == "offset":
        return "input_offset" if spec.at == "input" else "output_offset"
    return "gain" if spec.effect == "gain" else "nonlinearity"


def _refuse_no_span(frame: Frame, stage: int, pointer: str, faults: Faults) -> None:
    if frame.F[stage + 1] == 0.0:
        faults.add(
            f"{pointer}/effect",
            "nonlinearity is a share of the stage's span, which is zero: give full_scale, or more than one input value",
        )


def _place(spec: SourceSpec, frame: Frame, stage: int, pointer: str, faults: Faults) -> _Place:
    """Unit, companions and factors of a source: law(c - nominal) times the constant, at every site."""
    unit = DIMENSIONLESS
    if spec.effect == "offset":
        unit = frame.units[stage if spec.at == "input" else stage + 1]
    beside, factor = DIMENSIONLESS, np.ones(frame.sites)
    if spec.per is None:
        if spec.law != "linear":
            faults.add(
                f"{pointer}/law", f"found {spec.law} without per; a law says how the effect grows with a condition"
            )
    elif spec.per not in frame.conditions:
        faults.add(f"{pointer}/per", f"no condition is named {spec.per!r}; known: {known(frame.conditions)}")
    else:
        beside = frame.conditions[spec.per].unit ** LAW_POWER[spec.law]
        factor = _of_condition(frame.offsets[spec.per], spec.law)
    if spec.times is not None:
        if spec.times.is_rejection:
            faults.add(
                f"{pointer}/times", f'found {spec.times.text}; times is a plain factor or a quantity such as "350 ohm"'
            )
        beside, factor = beside * (spec.times.unit or DIMENSIONLESS), factor * spec.times.value
    return _Place(unit, beside, factor)


def _of_condition(offset: Array, law: str) -> Array:
    if law == "sqrt":
        return np.sqrt(np.abs(offset))
    return offset * offset if law == "square" else offset.copy()


# ---------------------------------------------------------------------------------------------
# Figures


def _read(
    spec: LawSpec, coherent: Unit, rules: RulesSpec, label: str, pointer: str, faults: Faults, told: Assumptions
) -> tuple[Reading, Unit] | None:
    """Figures in one unit, and their reading; None where there is a fault (noted)."""
    before = len(faults.found)
    quantities = _quantities(spec)
    if any(quantity.is_rejection for quantity in quantities.values()):
        figures, unit = _rejection(spec, quantities, coherent, pointer, faults), DIMENSIONLESS
    else:
        unit = next((q.unit for q in quantities.values() if q.unit and q.unit.same_kind(coherent)), coherent)
        figures = _figures(spec, quantities, unit, coherent, pointer, faults)
        if any(quantity.unit is None for quantity in quantities.values()) and coherent.symbol:
            told.note(f"a plain number is read in {coherent.symbol}", label)
    if len(faults.found) > before:
        return None
    try:
        reading = read(figures, rules)
    except UnreadableError as error:
        faults.add(f"{pointer}/{_sent_member(spec, error.member)}".rstrip("/"), error.detail)
        return None
    for assumption in reading.assumptions:
        told.note(assumption, label)
    return _with_rejection(reading, spec), unit


def _with_rejection(reading: Reading, spec: LawSpec) -> Reading:
    """Tell a rejection's dB figures beside the ratios that they stand for."""
    texts = [q.text for q in (spec.min or spec.max, spec.typ) if q is not None and q.is_rejection]
    if not texts:
        return reading
    return replace(reading, sentence=f"rejection of {' (typ '.join(texts)}{')' * (len(texts) - 1)}: {reading.sentence}")


def _quantities(spec: LawSpec) -> dict[str, Quantity]:
    """All given figures by their place, limits first: the first one's unit is the one told back."""
    named = {name: getattr(spec, name) for name in ("max", "min", "typ", "mean")}
    named |= {f"samples/{i}": value for i, value in enumerate(spec.samples or ())}
    return {name: value for name, value in named.items() if value is not None}


def _sent_member(spec: LawSpec, name: str) -> str:
    """The member a fault points at; where it wasn't sent, its parent."""
    return name if name and getattr(spec, name) is not None else ""


def _figures(
    spec: LawSpec, quantities: dict[str, Quantity], unit: Unit, coherent: Unit, pointer: str, faults: Faults
) -> Figures:
    values = {name: _figure(q, unit, coherent, f"{pointer}/{name}", faults) for name, q in quantities.items()}
    samples = tuple(values.pop(f"samples/{i}") for i in range(len(spec.samples or ())))
    return Figures(
        unit.symbol, shape=spec.shape, samples=samples or None, dof=spec.dof, top_ratio=spec.top_ratio, **values
    )


def _figure(quantity: Quantity, unit: Unit, coherent: Unit, pointer: str, faults: Faults) -> float:
    """One figure in ``unit``; its kind must be that of the unit that closes."""
    written = quantity.unit or coherent
    if not written.same_kind(coherent):
        faults.add(
            pointer, f"found {quantity.text}, a figure in {_say(written)}; the units close with {_say(coherent)} here"
        )
        return math.nan
    try:
        return quantity.value * written.factor_to(unit)
    except UnitError as error:
        faults.add(pointer, str(error))
        return math.nan


def _say(unit: Unit) -> str:
    return unit.symbol or "a plain number (%, ppm)"


def _rejection(spec: LawSpec, quantities: dict[str, Quantity], coherent: Unit, pointer: str, faults: Faults) -> Figures:
    """A rejection R in dB is an error of 10^(-R/20); its guaranteed figure stands in min (or max)."""
    if not coherent.same_kind(DIMENSIONLESS):
        some = next(name for name, q in quantities.items() if q.is_rejection)
        faults.add(
            f"{pointer}/{some}", f"a rejection in dB is a plain ratio, but the units close with {_say(coherent)} here"
        )
    for name, quantity in quantities.items():
        if not quantity.is_rejection or name not in ("min", "max", "typ"):
            faults.add(
                f"{pointer}/{name}", f"found {quantity.text}; beside a figure in dB, min and typ in dB are what is read"
            )
        elif abs(quantity.value) > FARTHEST_DB:
            faults.add(
                f"{pointer}/{name}",
                f"found {quantity.text}; write a rejection from {-FARTHEST_DB:g} to {FARTHEST_DB:g} dB",
            )
    if "min" in quantities and "max" in quantities:
        faults.add(f"{pointer}/max", "a rejection has one guaranteed figure: give it in min, and leave out max")
    guaranteed, typ = quantities.get("min", quantities.get("max")), quantities.get("typ")
    if guaranteed is not None and typ is not None and typ.value < guaranteed.value:
        faults.add(
            f"{pointer}/typ",
            f"typ {typ.text} is below the guaranteed {guaranteed.text}; a typical rejection is the larger figure",
        )
    ratio = {q: 10.0 ** (-_within(q.value) / 20.0) for q in (guaranteed, typ) if q is not None}
    return Figures(
        "",
        typ=None if typ is None else ratio[typ],
        max=None if guaranteed is None else ratio[guaranteed],
        shape=spec.shape,
        dof=spec.dof,
        top_ratio=spec.top_ratio,
    )


def _within(decibels: float) -> float:
    """A figure beyond the range is refused; until then it must not overflow."""
    return min(max(decibels, -FARTHEST_DB), FARTHEST_DB)


# ---------------------------------------------------------------------------------------------
# The standard of a calibration


def standards(
    spec: StandardSpec, frame: Frame, rules: RulesSpec, pointer: str, faults: Faults, told: Assumptions
) -> list[Source]:
    """The standard's own error: an input offset seen at the calibration sites only, one a point or one in common."""
    unit = frame.units[0]
    found = _read(spec, unit, rules, "calibration/standard", pointer, faults, told)
    if found is None:
        return []
    reading, written = found
    count = len(frame.points)
    at_points = [[site] for site in range(count, frame.sites)]
    groups = [list(range(count, frame.sites))] if spec.common or len(at_points) == 1 else at_points
    sources = []
    for k, sites in enumerate(groups):
        factor = np.zeros(frame.sites)
        factor[sites] = written.factor_to(unit)
        name = "standard" if len(groups) == 1 else f"standard at point {k + 1}"
        sources.append(
            Source(
                0,
                "calibration",
                name,
                "offset",
                "input_offset",
                reading.law,
                factor,
                reading.sentence,
                written.symbol,
                "unit",
                spec.dof,
            )
        )
    return sources


def refuse_lost_gain(sources: list[Source], pointers: list[str], stages: int, faults: Faults) -> None:
    """A stage's gain error must not be able to reach -100 %."""
    for stage in range(stages):
        gains = [i for i, source in enumerate(sources) if source.stage == stage and source.role == "gain"]
        if not gains:
            continue
        lowest = np.stack([_lowest(sources[i]) for i in gains])
        if lowest.sum(axis=0).min() <= -1.0:
            worst = gains[int(np.argmin(lowest.min(axis=1)))]
            faults.add(
                pointers[worst],
                f"the gain errors of this stage can reach {100.0 * lowest.sum(axis=0).min():.4g} %; "
                "at -100 % nothing is left of the signal, so they must stay above it",
            )


def _lowest(source: Source) -> Array:
    return np.minimum(source.factor * source.law.lower, source.factor * source.law.upper)
