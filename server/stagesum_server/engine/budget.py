"""One budget: S built once, the methods read it, the answer's records are filled."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from stagesum_schemas.records import (
    CONTRACT,
    Budget,
    Checks,
    Histogram,
    Interval,
    MonteCarlo,
    Point,
    PointConvolution,
    PointMonteCarlo,
    Rss,
    Service,
    Verdict,
    WorstCase,
)

from stagesum_server.engine import correlation, exact, monte_carlo, rare, rss, sensitivity, verdict, worst_case
from stagesum_server.engine.contributions import contributions, variance_parts
from stagesum_server.engine.convolution import NoExactLawError
from stagesum_server.engine.sampling import Sampler

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from stagesum_server.engine.chain import Limit, Model
    from stagesum_server.engine.sum_law import SumLaw

    Array = NDArray[np.float64]

CAUTIONS = (
    "An estimate from declared data, not a measurement: it is no better than the limits, laws and correlations stated.",
    "Where safety depends on the result, the applicable standard, local codes and a qualified engineer decide.",
)
RANGE_SIGMAS = 12.0  # half-width of the Monte Carlo grid where a source has no bounds


@dataclass(frozen=True)
class _Simulation:
    """The trials, the ends of the symmetric intervals (points, 2), and whether adaptive trials became stable."""

    tally: monte_carlo.Tally
    ends: Array
    stable: tuple[bool, float] | None


@dataclass(frozen=True)
class _Analysis:
    """What the methods found, before it is written into records."""

    model: Model
    S: Array
    extremes: worst_case.Extremes
    rss: rss.Propagation
    outside: Array | None
    simulation: _Simulation | None
    laws: list[SumLaw] | None
    no_laws: str
    rare: rare.JointFailure | None

    @cached_property
    def outside_exactly(self) -> Array | None:
        """Share outside the limit at every point by the exact laws."""
        return _outside_exactly(self.model.limit, self.laws) if self.model.limit else None

    @property
    def joint_yield(self) -> tuple[float, tuple[float, float]] | None:
        """Share of units inside the limit at every point and its 95 % interval, by the sharper of two estimates."""
        if self.simulation is None or self.model.limit is None:
            return None
        if self.rare is not None:
            low, high = self.rare.interval
            return 1.0 - self.rare.share, (1.0 - high, 1.0 - low)
        passed, trials = self.simulation.tally.inside_all, self.simulation.tally.trials
        return passed / trials, monte_carlo.clopper_pearson(passed, trials)


def compute(model: Model, version: str, threads: int = 1) -> Budget:
    """Answer a budget: every method asked for, contributions, verdict, checks."""
    found = _analyse(model, threads)
    governing = verdict.governing_point(model.limit, found.rss, found.extremes)
    points = tuple(_point(found, p) for p in range(len(model.points)))
    together = _monte_carlo(found, governing)
    return Budget(
        title=model.title,
        service=Service("stagesum", version, CONTRACT),
        refer_to=model.refer_to,
        unit=model.unit,
        span=model.span,
        coverage=model.coverage,
        points=points,
        governing_point=governing,
        monte_carlo=together,
        contributions=contributions(model, found.S, found.extremes, found.rss, governing),
        variance_parts=variance_parts(model, found.rss, governing),
        verdict=_verdict(found),
        checks=_checks(found, points),
        assumptions=(*model.assumptions, *_notes(found)),
        cautions=CAUTIONS,
    )


def _notes(found: _Analysis) -> tuple[str, ...]:
    return (f"Convolution is left out: {found.no_laws}.",) if found.no_laws else ()


def _analyse(model: Model, threads: int) -> _Analysis:
    S = sensitivity.matrix(model)
    clusters = correlation.clusters(model)
    extremes = worst_case.extremes(model, S, clusters)
    propagation = rss.propagate(model, S, clusters)
    share = rss.outside(propagation, model.limit.lower, model.limit.upper) if model.limit else None
    simulation = None
    if "monte_carlo" in model.methods:
        simulation = _simulate(model, clusters, extremes, propagation, threads)
    laws, no_laws = _convolve(model, S, clusters)
    seldom = None
    if simulation is not None and model.limit is not None and model.monte_carlo.sampling == "auto":
        seldom = rare.estimate(
            model, model.limit, S, clusters, propagation, _outside_exactly(model.limit, laws), threads
        )
    return _Analysis(model, S, extremes, propagation, share, simulation, laws, no_laws, seldom)


def _outside_exactly(limit: Limit, laws: list[SumLaw] | None) -> Array | None:
    """Share outside the limit at every point by the exact laws."""
    if laws is None:
        return None
    ends = zip(laws, limit.lower, limit.upper, strict=True)
    return np.array([law.outside(float(lower), float(upper)) for law, lower, upper in ends])


class MethodRefusedError(ValueError):
    """A method that was named, and can't be had for this chain."""

    def __init__(self, method: str, detail: str) -> None:
        super().__init__(detail)
        self.method, self.detail = method, detail


def _convolve(model: Model, S: Array, clusters: tuple[correlation.Cluster, ...]) -> tuple[list[SumLaw] | None, str]:
    """Exact laws at all points, or the reason why there are none; refused where the method was named."""
    if "convolution" not in model.methods:
        return None, ""
    try:
        return exact.error_laws(model, S, clusters), ""
    except NoExactLawError as error:
        if model.methods_named or (model.limit and "convolution" in model.limit.by_named):
            raise MethodRefusedError("convolution", str(error)) from None
        return None, str(error)


def _simulate(
    model: Model,
    clusters: tuple[correlation.Cluster, ...],
    extremes: worst_case.Extremes,
    propagation: rss.Propagation,
    threads: int,
) -> _Simulation:
    """Run the trials; the grid spans the worst case, or so many sigmas where a source has no bounds."""
    lower, upper = extremes.lower, extremes.upper
    if not all(variable.law.bounded for variable in model.variables):
        lower = np.minimum(lower, propagation.mean - RANGE_SIGMAS * propagation.sigma)
        upper = np.maximum(upper, propagation.mean + RANGE_SIGMAS * propagation.sigma)
    tally = monte_carlo.Tally(monte_carlo.Grid.between(lower, upper), propagation.mean, model.limit)
    asked = model.monte_carlo
    sampler = Sampler(model, clusters, asked.seed)
    stable = None
    if asked.adaptive:
        stable = monte_carlo.run_adaptively(sampler, tally, model.coverage, asked.max_trials, threads)
    else:
        monte_carlo.run(sampler, tally, 0, asked.trials or monte_carlo.DEFAULT_TRIALS, threads)
    if asked.refine:
        return _Simulation(tally, monte_carlo.refined_intervals(sampler, tally, model.coverage, threads), stable)
    ends = np.array([tally.interval(p, model.coverage) for p in range(len(model.points))])
    return _Simulation(tally, ends, stable)


# ---------------------------------------------------------------------------------------------
# Records


def _point(found: _Analysis, p: int) -> Point:
    model = found.model
    point, limit = model.points[p], model.limit
    return Point(
        input=point.input,
        conditions=point.conditions,
        nominal=float(model.nominal[p, model.node]),
        limit=Interval(float(limit.lower[p]), float(limit.upper[p])) if limit else None,
        worst_case=_worst_case(found, p) if "worst_case" in model.methods else None,
        rss=_rss(found, p) if "rss" in model.methods else None,
        monte_carlo=_point_monte_carlo(found.simulation, model, p) if found.simulation else None,
        convolution=_point_convolution(found, p) if found.laws else None,
    )


def _worst_case(found: _Analysis, p: int) -> WorstCase:
    x = found.extremes
    first = Interval(float(x.first_lower[p].sum()), float(x.first_upper[p].sum()))
    return WorstCase(float(x.lower[p]), float(x.upper[p]), first)


def _rss(found: _Analysis, p: int) -> Rss:
    r, worst, limit = found.rss, found.extremes, found.model.limit
    mean, sigma, dof = float(r.mean[p]), float(r.sigma[p]), float(r.dof[p])
    lower, upper = max(float(r.lower[p]), float(worst.lower[p])), min(float(r.upper[p]), float(worst.upper[p]))
    share = float(found.outside[p]) if found.outside is not None else None
    capability = _capability(float(limit.lower[p]), float(limit.upper[p]), mean, sigma) if limit else (None, None)
    return Rss(
        mean=mean,
        sigma=sigma,
        coverage_factor=float(r.factor[p]),
        dof=dof if np.isfinite(dof) else None,
        lower=lower,
        upper=upper,
        cut=lower > float(r.lower[p]) or upper < float(r.upper[p]),
        yield_=None if share is None else 1.0 - share,
        outside_ppm=None if share is None else 1e6 * share,
        cp=capability[0],
        cpk=capability[1],
    )


def _capability(lower: float, upper: float, mean: float, sigma: float) -> tuple[float | None, float | None]:
    """Cp = (U - L) / 6 sigma and Cpk = min(U - mean, mean - L) / 3 sigma; none without spread."""
    if sigma == 0.0:
        return None, None
    return (upper - lower) / (6.0 * sigma), min(upper - mean, mean - lower) / (3.0 * sigma)


def _point_monte_carlo(simulation: _Simulation, model: Model, p: int) -> PointMonteCarlo:
    tally, ends = simulation.tally, simulation.ends[p]
    passed = int(tally.inside[p])
    has_limit = model.limit is not None
    return PointMonteCarlo(
        float(tally.mean[p]),
        float(tally.sigma[p]),
        float(ends[0]),
        float(ends[1]),
        shortest=Interval(*tally.shortest(p, model.coverage)),
        yield_=passed / tally.trials if has_limit else None,
        yield_interval=monte_carlo.clopper_pearson(passed, tally.trials) if has_limit else None,
    )


def _point_convolution(found: _Analysis, p: int) -> PointConvolution:
    law = (found.laws or [])[p]
    shortest = law.shortest(found.model.coverage)
    share = float(found.outside_exactly[p]) if found.outside_exactly is not None else None
    return PointConvolution(
        law.mean,
        law.sigma,
        *law.interval(found.model.coverage),
        shortest=Interval(*shortest) if shortest else None,
        yield_=None if share is None else 1.0 - share,
        outside_ppm=None if share is None else 1e6 * share,
    )


def _monte_carlo(found: _Analysis, governing: int) -> MonteCarlo | None:
    if found.simulation is None:
        return None
    tally, stable, asked = found.simulation.tally, found.simulation.stable, found.model.monte_carlo
    edges, counts = tally.histogram(governing)
    joint = found.joint_yield
    return MonteCarlo(
        trials=tally.trials,
        seed=asked.seed,
        adaptive=asked.adaptive,
        converged=stable[0] if stable else None,
        tolerance=stable[1] if stable else None,
        histogram=Histogram(tuple(edges.tolist()), tuple(counts.tolist())),
        joint_yield=joint[0] if joint else None,
        joint_yield_interval=joint[1] if joint else None,
        sampling=("importance" if found.rare else "plain") if joint else None,
        effective_trials=(found.rare.effective_trials if found.rare else float(tally.trials)) if joint else None,
    )


def _verdict(found: _Analysis) -> Verdict | None:
    model = found.model
    said: dict[str, str] = {}
    if model.limit is None:
        return None
    if "worst_case" in model.methods:
        said["worst_case"] = verdict.of_worst_case(found.extremes, model.limit)
    if "rss" in model.methods and found.outside is not None:
        said["rss"] = verdict.of_rss(found.outside, model.limit)
    if found.outside_exactly is not None:
        said["convolution"] = verdict.of_convolution(found.outside_exactly, model.limit)
    if found.joint_yield is not None:
        said["monte_carlo"] = verdict.of_monte_carlo(found.joint_yield[1], model.limit)
    return verdict.overall(said, model.limit)


def _checks(found: _Analysis, points: tuple[Point, ...]) -> Checks | None:
    if "rss" not in found.model.methods:
        return None
    exactly = [Interval(point.convolution.lower, point.convolution.upper) for point in points if point.convolution]
    if exactly:
        return verdict.check_rss(found.model, found.rss, "convolution", exactly, None)
    drawn = [Interval(point.monte_carlo.lower, point.monte_carlo.upper) for point in points if point.monte_carlo]
    trials = found.simulation.tally.trials if found.simulation else None
    return verdict.check_rss(found.model, found.rss, "monte_carlo", drawn, trials) if drawn else None
