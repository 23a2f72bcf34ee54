"""Records: what a request asks and what an answer says, as frozen dataclasses.

Standard library only, so that the client can use them without the service's libraries. The
marshmallow classes beside this module fill the request records; the engine makes the answer
records; the client returns the very same. ``to_dict`` and ``from_dict`` are the JSON form: a
trailing underscore of an attribute is dropped (``yield_`` is ``yield``), and what is ``None`` is
left out.
"""

from __future__ import annotations

import types
import typing
from dataclasses import dataclass, field, fields
from functools import cache
from typing import Any, Self

if typing.TYPE_CHECKING:
    from collections.abc import Callable, Hashable, Mapping

    from stagesum_schemas.units import Quantity, Unit

CONTRACT = "v1"
METHODS = ("worst_case", "rss", "monte_carlo", "convolution")


@cache
def _members(cls: Any) -> tuple[tuple[str, str], ...]:
    """Give the (attribute, JSON member) pairs of a record class."""
    return tuple((f.name, f.name.rstrip("_")) for f in fields(cls))


def _plain(value: Any) -> Any:
    """Give the JSON form of one value: records to dicts, tuples to lists."""
    if isinstance(value, Record):
        return value.to_dict()
    if isinstance(value, tuple):
        return [_plain(item) for item in value]
    if isinstance(value, dict):
        return {key: _plain(item) for key, item in value.items()}
    return value


def _reader(hint: Any) -> Callable[[Any], Any]:
    """Give the function that makes a value of type ``hint`` from its JSON form."""
    origin, arguments = typing.get_origin(hint), typing.get_args(hint)
    if origin in (typing.Union, types.UnionType):
        return _reader(next(part for part in arguments if part is not types.NoneType))
    if origin is tuple:
        read = _reader(arguments[0])
        return lambda value: tuple(read(item) for item in value)
    if origin is dict:
        read = _reader(arguments[1])
        return lambda value: {key: read(item) for key, item in value.items()}
    if isinstance(hint, type) and issubclass(hint, Record):
        return hint.from_dict
    return lambda value: value


@cache
def _readers(cls: Any) -> tuple[tuple[str, str, Callable[[Any], Any]], ...]:
    """Give (attribute, JSON member, reader) for each field of a record class."""
    hints = typing.get_type_hints(cls)
    return tuple((name, member, _reader(hints[name])) for name, member in _members(cls))


def _key(cls: type) -> Hashable:
    """A class as a key of a cache (type checkers take its instances' hash for its own)."""
    return typing.cast("Hashable", cls)


class Record:
    """Base of the answer records: conversion to and from their JSON form."""

    __slots__ = ()

    def to_dict(self) -> dict[str, Any]:
        """Return the JSON form: plain dicts, lists and numbers, absent members left out."""
        pairs = ((member, getattr(self, name)) for name, member in _members(_key(type(self))))
        return {member: _plain(value) for member, value in pairs if value is not None}

    @classmethod
    def from_dict(cls, data: Mapping[str, Any]) -> Self:
        """Make the record from its JSON form; members that this version doesn't know are passed over."""
        return cls(
            **{name: read(data[member]) for name, member, read in _readers(_key(cls)) if data.get(member) is not None}
        )


# ---------------------------------------------------------------------------------------------
# The request of POST /v1/budget. Quantities keep the text they came as; units close in intake.


@dataclass(frozen=True, slots=True)
class InputSpec:
    """The measured quantity: its unit, the values it is examined at and, where given, its span."""

    unit: Unit
    values: tuple[Quantity, ...]
    full_scale: Quantity | None = None


@dataclass(frozen=True, slots=True)
class ConditionSpec:
    """A named influence (temperature, supply, ...): its nominal value and the values examined."""

    nominal: Quantity
    values: tuple[Quantity, ...]


@dataclass(frozen=True, slots=True)
class LawSpec:
    """What a data sheet line says of one quantity; see model.md section 3 for how it is read."""

    typ: Quantity | None = None
    min: Quantity | None = None
    max: Quantity | None = None
    mean: Quantity | None = None
    shape: str | None = None
    samples: tuple[Quantity, ...] | None = None
    dof: float | None = None
    top_ratio: float | None = None


@dataclass(frozen=True, slots=True)
class SourceSpec(LawSpec):
    """One error source of a stage: a data sheet line and where it acts."""

    name: str = ""
    effect: str = "offset"
    at: str = "input"
    per: str | None = None
    law: str = "linear"
    times: Quantity | None = None
    varies_by: str = "unit"


@dataclass(frozen=True, slots=True)
class StageSpec:
    """One stage: nominal gain, optional output unit and span, and its error sources."""

    name: str
    gain: Quantity
    unit: Unit | None = None
    full_scale: Quantity | None = None
    sources: tuple[SourceSpec, ...] = ()


@dataclass(frozen=True, slots=True)
class CalibrationPointSpec:
    """Where the chain is calibrated: an input value and, where they differ from nominal, conditions."""

    input: Quantity
    conditions: dict[str, Quantity] = field(default_factory=dict)


@dataclass(frozen=True, slots=True)
class StandardSpec(LawSpec):
    """The error of the standard that a calibration uses; ``common``: the same error at both points."""

    common: bool = False


@dataclass(frozen=True, slots=True)
class CalibrationSpec:
    """One or two calibration points, how many readings each averages, and the standard's own error."""

    points: tuple[CalibrationPointSpec, ...]
    readings_averaged: int = 1
    standard: StandardSpec | None = None


@dataclass(frozen=True, slots=True)
class CorrelationSpec:
    """Two sources, each ``stage/source``, and their correlation coefficient."""

    between: tuple[str, str]
    coefficient: float


@dataclass(frozen=True, slots=True)
class LimitSpec:
    """The permitted error at the referred node; the given forms add up."""

    min: Quantity | None = None
    max: Quantity | None = None
    of_span: Quantity | None = None
    of_reading: Quantity | None = None
    yield_: float | None = None
    by: tuple[str, ...] | None = None


@dataclass(frozen=True, slots=True)
class RulesSpec:
    """How data sheet figures are read where a source does not say it itself."""

    typ_sigmas: float = 1.0
    max_sigmas: float | None = None
    typ_covers: float | None = None
    unbounded_sigmas: float = 3.0


@dataclass(frozen=True, slots=True)
class MonteCarloSpec:
    """How many trials, or how they are chosen, and the seed."""

    trials: int | None = None
    seed: int = 1
    adaptive: bool = False
    max_trials: int = 10_000_000
    sampling: str = "auto"
    refine: bool = False


@dataclass(frozen=True, slots=True)
class BudgetRequest:
    """The body of ``POST /v1/budget`` after its form has been checked."""

    input: InputSpec
    stages: tuple[StageSpec, ...]
    title: str = ""
    conditions: dict[str, ConditionSpec] = field(default_factory=dict)
    calibration: CalibrationSpec | None = None
    correlations: tuple[CorrelationSpec, ...] = ()
    refer_to: str = "output"
    limit: LimitSpec | None = None
    rules: RulesSpec = RulesSpec()
    monte_carlo: MonteCarloSpec = MonteCarloSpec()
    readings_averaged: int = 1
    methods: tuple[str, ...] | None = None
    coverage: float | None = None
    coverage_factor: float | None = None


# ---------------------------------------------------------------------------------------------
# The answer of POST /v1/budget. Numbers are in the answer's ``unit`` where nothing else is said.


@dataclass(frozen=True, slots=True)
class Interval(Record):
    """A closed interval."""

    lower: float
    upper: float


@dataclass(frozen=True, slots=True)
class WorstCase(Record):
    """Extremes of the exact chain with every source inside its bounds, and the first-order sum."""

    lower: float
    upper: float
    first_order: Interval


@dataclass(frozen=True, slots=True)
class Rss(Record):
    """Law of propagation (JCGM 100): limits are mean +- coverage_factor * sigma, cut at the worst case."""

    mean: float
    sigma: float
    coverage_factor: float
    lower: float
    upper: float
    cut: bool
    dof: float | None = None
    yield_: float | None = None
    outside_ppm: float | None = None
    cp: float | None = None
    cpk: float | None = None


@dataclass(frozen=True, slots=True)
class PointMonteCarlo(Record):
    """Monte Carlo of the exact chain at one point (JCGM 101): symmetric and shortest interval, yield."""

    mean: float
    sigma: float
    lower: float
    upper: float
    shortest: Interval
    yield_: float | None = None
    yield_interval: tuple[float, ...] | None = None


@dataclass(frozen=True, slots=True)
class PointConvolution(Record):
    """Exact law of the first-order error at one point: symmetric and shortest interval, yield, share outside."""

    mean: float
    sigma: float
    lower: float
    upper: float
    shortest: Interval | None = None
    yield_: float | None = None
    outside_ppm: float | None = None


@dataclass(frozen=True, slots=True)
class Point(Record):
    """One operating point with what every method says of it."""

    input: float
    conditions: dict[str, float]
    nominal: float
    limit: Interval | None = None
    worst_case: WorstCase | None = None
    rss: Rss | None = None
    monte_carlo: PointMonteCarlo | None = None
    convolution: PointConvolution | None = None


@dataclass(frozen=True, slots=True)
class Histogram(Record):
    """Counts of Monte Carlo errors at the governing point between consecutive edges."""

    edges: tuple[float, ...]
    counts: tuple[int, ...]


@dataclass(frozen=True, slots=True)
class MonteCarlo(Record):
    """Monte Carlo over all points on the same draws: a unit passes if it is inside the limit at each."""

    trials: int
    seed: int
    histogram: Histogram
    adaptive: bool = False
    converged: bool | None = None
    tolerance: float | None = None
    joint_yield: float | None = None
    joint_yield_interval: tuple[float, ...] | None = None
    sampling: str | None = None
    effective_trials: float | None = None


@dataclass(frozen=True, slots=True)
class Largest(Record):
    """The point where a source's first-order bound is largest, and its contribution there."""

    point: int
    bound: float
    sigma: float


@dataclass(frozen=True, slots=True)
class Contribution(Record):
    """One source: how its data sheet line was read, and its part in the error at the governing point.

    ``mean``, ``sigma`` and ``bounds`` are the source's own, in ``source_unit``; ``bound`` and
    ``contribution_sigma`` are at the referred node, in the answer's unit.
    """

    stage: str
    source: str
    effect: str
    shape: str
    source_unit: str
    mean: float
    sigma: float
    bounds: tuple[float, ...]
    reading: str
    varies_by: str
    sensitivity: float
    bound: float
    bound_share: float
    contribution_sigma: float
    variance_share: float
    largest: Largest


@dataclass(frozen=True, slots=True)
class VarianceParts(Record):
    """Shares of the variance at the governing point: fixed for a built unit, and new at every reading."""

    unit: float
    reading: float


@dataclass(frozen=True, slots=True)
class Verdict(Record):
    """``pass``, ``fail`` or ``undecided`` for each method; ``overall`` stands on the methods in ``by``."""

    overall: str
    by: tuple[str, ...]
    yield_: float
    worst_case: str | None = None
    rss: str | None = None
    monte_carlo: str | None = None
    convolution: str | None = None


@dataclass(frozen=True, slots=True)
class Checks(Record):
    """Does the simple method hold? JCGM 101:2008, 8.2: interval ends agree within ``tolerance``.

    ``rss_holds`` is absent where the trials are too few to tell; ``detail`` says so.
    """

    rss_against: str
    tolerance: float
    largest_difference: float
    point: int
    detail: str
    rss_holds: bool | None = None


@dataclass(frozen=True, slots=True)
class Service(Record):
    """Who answered."""

    name: str
    version: str
    contract: str


@dataclass(frozen=True, slots=True)
class Budget(Record):
    """The answer of ``POST /v1/budget``."""

    title: str
    service: Service
    refer_to: str
    unit: str
    points: tuple[Point, ...]
    governing_point: int
    contributions: tuple[Contribution, ...]
    variance_parts: VarianceParts
    assumptions: tuple[str, ...]
    cautions: tuple[str, ...]
    coverage: float
    span: float | None = None
    monte_carlo: MonteCarlo | None = None
    verdict: Verdict | None = None
    checks: Checks | None = None


# ---------------------------------------------------------------------------------------------
# Errors


@dataclass(frozen=True, slots=True)
class Fault(Record):
    """One fault of a body: where (RFC 6901 pointer as URI fragment), what was found, what would be right."""

    pointer: str
    detail: str


@dataclass(frozen=True, slots=True)
class Problem(Record):
    """RFC 9457 problem details."""

    type: str
    title: str
    status: int
    detail: str
    errors: tuple[Fault, ...] = ()
