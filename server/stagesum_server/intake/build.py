"""From a request whose form is right to the engine's model."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from scipy import special
from stagesum_schemas.records import METHODS
from stagesum_schemas.units import DIMENSIONLESS

from stagesum_server.engine import calibration, correlation
from stagesum_server.engine.chain import Calibration, Correlation, Limit, Model, Source
from stagesum_server.intake.assumptions import Assumptions
from stagesum_server.intake.faults import Faults
from stagesum_server.intake.nodes import Frame, frame, in_unit
from stagesum_server.intake.sources import refuse_lost_gain, source, standards

if TYPE_CHECKING:
    from stagesum_schemas.records import BudgetRequest, LimitSpec

    from stagesum_server.limits import Limits

DEFAULT_COVERAGE = 0.9973


def build(request: BudgetRequest, limits: Limits) -> Model:
    """Build the model of a budget request.

    Raises
    ------
    InvalidRequest
        With every fault of meaning: units that don't close, names that resolve to nothing, figures that
        contradict each other, sizes beyond the service's limits.

    """
    faults, told = Faults(), Assumptions()
    _refuse_sizes(request, limits, faults)
    faults.refuse()
    chain = frame(request, limits.max_points, faults)
    sources = _sources(request, chain, faults, told)
    correlations = _correlations(request, sources, faults)
    node = _node(request, faults)
    methods = request.methods or METHODS
    coverage = _coverage(request, told)
    limit = _limit(request, methods, chain, node, coverage, faults, told)
    faults.refuse()
    good = tuple(made for made in sources if made is not None)
    _note_assumptions(request, good, told)
    model = Model(
        title=request.title,
        stages=tuple(stage.name for stage in request.stages),
        gains=chain.gains,
        nominal=chain.v,
        spans=chain.F[1:],
        points=chain.points,
        sources=good,
        correlations=correlations,
        calibration=_calibration(request, chain),
        readings=request.readings_averaged,
        refer_to=request.refer_to,
        node=node,
        unit=chain.units[node].symbol,
        span=float(chain.F[node]) or None,
        limit=limit,
        methods=methods,
        methods_named=request.methods is not None,
        coverage=coverage,
        coverage_factor=request.coverage_factor,
        monte_carlo=request.monte_carlo,
        assumptions=told.sentences(),
    )
    if calibration.can_collapse(model):
        faults.add(
            "#/calibration/points",
            "errors within their bounds can make both calibration readings equal, so that no line can be drawn through "
            "them; set the points farther apart",
        )
    faults.refuse()
    return model


def _refuse_sizes(request: BudgetRequest, limits: Limits, faults: Faults) -> None:
    count = sum(len(stage.sources) for stage in request.stages)
    trials = request.monte_carlo.max_trials if request.monte_carlo.adaptive else request.monte_carlo.trials or 0
    for pointer, what, found, most in (
        ("#/stages", "stages", len(request.stages), limits.max_stages),
        ("#/stages", "sources", count, limits.max_sources),
        ("#/monte_carlo", "trials", trials, limits.max_trials),
    ):
        if found > most:
            faults.add(pointer, f"found {found} {what}; at most {most} are computed")
    if count == 0:
        faults.add("#/stages", "no stage has an error source, so there is nothing to add up; give at least one")


def _sources(request: BudgetRequest, chain: Frame, faults: Faults, told: Assumptions) -> list[Source | None]:
    """All sources in order, None in the place of a faulty one, then the calibration standard's."""
    sources: list[Source | None] = []
    pointers = []
    for i, stage in enumerate(request.stages):
        for j, spec in enumerate(stage.sources):
            pointers.append(f"#/stages/{i}/sources/{j}")
            sources.append(source(spec, chain, i, stage.name, request.rules, pointers[-1], faults, told))
    good = [(made, pointer) for made, pointer in zip(sources, pointers, strict=True) if made is not None]
    refuse_lost_gain([made for made, _ in good], [pointer for _, pointer in good], len(request.stages), faults)
    if request.calibration is not None and request.calibration.standard is not None:
        pointer = "#/calibration/standard"
        sources += standards(request.calibration.standard, chain, request.rules, pointer, faults, told)
    return sources


def _correlations(request: BudgetRequest, sources: list[Source | None], faults: Faults) -> tuple[Correlation, ...]:
    """Correlations with their sources found, and the matrix they make checked."""
    labels = [f"{stage.name}/{spec.name}" for stage in request.stages for spec in stage.sources]
    found: list[Correlation] = []
    for position, spec in enumerate(request.correlations):
        place = f"#/correlations/{position}"
        missing = [k for k, label in enumerate(spec.between) if label not in labels]
        for k in missing:
            faults.add(
                f"{place}/between/{k}", f"no source {spec.between[k]!r}; write stage/source, such as {labels[0]!r}"
            )
        if missing:
            continue
        first, second = (labels.index(label) for label in spec.between)
        a, b = sources[first], sources[second]
        pair = {first, second}
        if first == second:
            faults.add(f"{place}/between", "both are the same source; a correlation needs two")
        elif any({c.first, c.second} == pair for c in found):
            faults.add(f"{place}/between", "this pair stands before in the list; state it once")
        elif a is not None and b is not None and a.varies_by != b.varies_by:
            faults.add(f"{place}/between", "one varies by unit, the other by reading; such two can't be correlated")
        else:
            found.append(Correlation(first, second, spec.coefficient, position))
    try:
        correlation.clusters_of_sources(len(sources), tuple(found))
    except correlation.ContradictionError as error:
        for position in error.positions:
            faults.add(f"#/correlations/{position}", error.detail)
    return tuple(found)


def _node(request: BudgetRequest, faults: Faults) -> int:
    """Number of the node that errors are referred to: 0 the input, i the output of stage i."""
    names = [stage.name for stage in request.stages]
    if request.refer_to == "input":
        return 0
    if request.refer_to == "output":
        return len(names)
    if request.refer_to not in names:
        faults.add(
            "#/refer_to", f"found {request.refer_to!r}; write input, output or the name of a stage: {', '.join(names)}"
        )
        return 0
    return names.index(request.refer_to) + 1


def _coverage(request: BudgetRequest, told: Assumptions) -> float:
    if request.coverage_factor is not None:
        coverage = float(special.erf(request.coverage_factor / np.sqrt(2.0)))
        told.note(
            f"simulated intervals have the coverage {coverage:.6g}, the normal law's within {request.coverage_factor:g} sigma"
        )
        return coverage
    if request.coverage is None:
        told.note(f"the coverage is {DEFAULT_COVERAGE:g}")
        return DEFAULT_COVERAGE
    return request.coverage


def _limit(
    request: BudgetRequest,
    methods: tuple[str, ...],
    chain: Frame,
    node: int,
    coverage: float,
    faults: Faults,
    told: Assumptions,
) -> Limit | None:
    """Permitted error at each operating point: the stated forms added up."""
    spec = request.limit
    if spec is None:
        return None
    if spec.min is None and spec.max is None and spec.of_span is None and spec.of_reading is None:
        faults.add("#/limit", "no limit is stated: give max, min and max, of_span or of_reading")
    fixed_lower, fixed_upper = _fixed_limit(spec, chain, node, faults)
    share = {name: _share(spec, name, faults) for name in ("of_span", "of_reading")}
    if share["of_span"] and chain.F[node] == 0.0:
        faults.add(
            "#/limit/of_span", "the span is zero with a single input value; give input.full_scale or more values"
        )
    v = chain.v[: len(chain.points), node]
    widening = share["of_span"] * chain.F[node] + share["of_reading"] * np.abs(v)
    if spec.yield_ is None:
        told.note(f"the yield to reach is the coverage, {coverage:.6g}")
    by = spec.by or tuple(m for m in methods if m != "worst_case") or methods
    for k, method in enumerate(spec.by or ()):
        if method not in methods:
            faults.add(f"#/limit/by/{k}", f"{method} is not among the methods asked for: {', '.join(methods)}")
    return Limit(fixed_lower - widening, fixed_upper + widening, spec.yield_ or coverage, by, spec.by or ())


def _fixed_limit(spec: LimitSpec, chain: Frame, node: int, faults: Faults) -> tuple[float, float]:
    unit = chain.units[node]
    upper = in_unit(spec.max, unit, "#/limit/max", faults) if spec.max is not None else 0.0
    if spec.min is None:
        if upper < 0.0 or (spec.max is not None and upper == 0.0):
            faults.add(
                "#/limit/max",
                f"max alone means +-max and must be above zero; give min beside it for {spec.max.text if spec.max else ''}",
            )
        return -upper, upper
    lower = in_unit(spec.min, unit, "#/limit/min", faults)
    if spec.max is None:
        faults.add("#/limit/min", "min needs max beside it; max alone means +-max")
    elif lower >= upper:
        faults.add("#/limit/max", f"max {spec.max.text} must be larger than min {spec.min.text}")
    return lower, upper


def _share(spec: LimitSpec, name: str, faults: Faults) -> float:
    quantity = getattr(spec, name)
    if quantity is None:
        return 0.0
    share = in_unit(quantity, DIMENSIONLESS, f"#/limit/{name}", faults)
    if share <= 0.0:
        faults.add(f"#/limit/{name}", f"found {quantity.text}; it must be above zero")
    return share


def _calibration(request: BudgetRequest, chain: Frame) -> Calibration | None:
    if request.calibration is None:
        return None
    count, v = len(chain.points), chain.v[:, -1]
    weights, step = calibration.weights(v[:count], v[count:])
    return Calibration(weights, step, request.calibration.readings_averaged)


def _note_assumptions(request: BudgetRequest, sources: tuple[Source, ...], told: Assumptions) -> None:
    told.note("sources without a stated correlation are independent")
    if any(0.0 < abs(spec.coefficient) < 1.0 for spec in request.correlations):
        told.note("the worst case ignores correlations other than +-1; they can only make it smaller")
        told.note(
            "a coefficient is that of a Gaussian copula: of normal scores, and of the sources themselves where they are normal"
        )
    spans = {s.stage for s in sources if s.role == "nonlinearity"}
    if any(request.stages[i].full_scale is None for i in spans):
        told.note("a span that isn't stated is that of the input values")
    if request.calibration is not None:
        if spans:
            told.note("calibration doesn't remove nonlinearity")
        if request.calibration.standard is None:
            told.note("the calibration's standard has no error of its own")
