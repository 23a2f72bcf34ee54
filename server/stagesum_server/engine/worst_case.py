"""Worst case: the extremes of the exact chain with every source inside its bounds (model.md, section 6).

Without calibration and merged causes every variable is used once, and interval recursion stage by
stage is exact. With them, the error is monotone in every single variable (a quotient of functions
straight in it), so the extreme is a vertex: it is found by following the signs of the gradient to
a fixed point. A merged cause moves several variables at once along one path; there the error is
searched along the path too, since its extreme may lie inside.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from stagesum_server.engine.chain import advance

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from stagesum_server.engine.chain import Model, Variable
    from stagesum_server.engine.correlation import Cause, Cluster

    Array = NDArray[np.float64]

SWEEPS = 200
IDLE = 1e-12  # share of a point's largest sensitivity below which a variable has no first-order effect
PATH_STEPS = 65  # places along a merged cause's path that are tried before the best one is refined
REFINEMENTS = 24


@dataclass(frozen=True)
class Extremes:
    """Exact and first-order extremes at each point, and the first-order part of each variable.

    ``first_lower`` and ``first_upper`` have shape (points, variables) and add up to the first-order sums.
    """

    lower: Array
    upper: Array
    first_lower: Array
    first_upper: Array


class Path:
    """The way along which the members of a cause move together; ``values`` has shape (steps, members)."""

    def __init__(self, cause: Cause, variables: tuple[Variable, ...]) -> None:
        self.members = list(cause.members)
        self.laws = [variables[member].law for member in self.members]
        self.singles = [variables[member].single for member in self.members]
        self.signs = cause.signs
        self.straight = cause.same_path(variables)

    def values(self, u: Array) -> Array:
        """Member values at path positions ``u`` in [0, 1]; shape of ``u`` plus one axis of members."""
        columns = []
        for law, single, sign in zip(self.laws, self.singles, self.signs, strict=True):
            position = u if sign > 0 else 1.0 - u
            if self.straight:
                columns.append(law.lower + (law.upper - law.lower) * position)
            else:
                columns.append(_clipped_quantile(law.lower, law.upper, single.quantile(position)))
        return np.stack(columns, axis=-1)


def _clipped_quantile(lower: float, upper: float, values: Array) -> Array:
    return np.clip(np.nan_to_num(values, posinf=upper, neginf=lower), lower, upper)


def extremes(model: Model, S: Array, clusters: tuple[Cluster, ...]) -> Extremes:
    """Extremes at every operating point; S has shape (points, variables)."""
    variables = model.variables
    low = np.array([variable.law.lower for variable in variables])
    high = np.array([variable.law.upper for variable in variables])
    causes = [cause for cluster in clusters for cause in cluster.causes if len(cause.members) > 1]
    paths = [Path(cause, variables) for cause in causes]
    at_lower = np.where(S > 0.0, low, high)
    at_upper = np.where(S > 0.0, high, low)
    for path in paths:
        at_lower[:, path.members] = _path_ends(S[:, path.members], path, -1.0)
        at_upper[:, path.members] = _path_ends(S[:, path.members], path, 1.0)
    if model.calibration is None and not paths:
        lower, upper = _by_intervals(model, low, high)
    else:
        lower = _by_search(model, S, at_lower, low, high, paths, -1.0)
        upper = _by_search(model, S, at_upper, low, high, paths, 1.0)
    return Extremes(lower, upper, S * at_lower, S * at_upper)


def _path_ends(s: Array, path: Path, direction: float) -> Array:
    """Member values that are extreme in first order along a path; ``s`` has shape (points, members)."""
    u = np.linspace(0.0, 1.0, 2 if path.straight else 1025)
    candidates = path.values(u)
    total = np.sum(s[:, None, :] * candidates, axis=-1)
    return np.asarray(candidates[np.argmax(direction * total, axis=1)])


# ---------------------------------------------------------------------------------------------
# Interval recursion


def _by_intervals(model: Model, low: Array, high: Array) -> tuple[Array, Array]:
    """Exact extremes where every variable is used once: intervals carried stage by stage."""
    count = len(model.points)
    sums = {end: _stage_sums(model, low, high, end) for end in ("lower", "upper")}
    d_low = d_high = np.zeros(count)
    for i, gain in enumerate(model.gains):
        v = model.nominal[:count, i]
        t_low, t_high = d_low + sums["lower"]["a"][i], d_high + sums["upper"]["a"][i]
        # straight in t = d + a and in g, so the extremes are at corners
        corners = np.stack(
            [
                advance(t, v, float(gain), 0.0, g, 0.0)
                for t in (t_low, t_high)
                for g in (sums["lower"]["g"][i], sums["upper"]["g"][i])
            ]
        )
        d_low = corners.min(axis=0) + sums["lower"]["b"][i]
        d_high = corners.max(axis=0) + sums["upper"]["b"][i]
    ends = d_low / model.referral, d_high / model.referral
    return np.minimum(*ends), np.maximum(*ends)


def _stage_sums(model: Model, low: Array, high: Array, end: str) -> dict[str, Array]:
    """Sums of the lower or upper bounds of a, g, b at every stage and point; shapes (stages, points)."""
    count, choose = len(model.points), np.minimum if end == "lower" else np.maximum
    sums = {name: np.zeros((len(model.stages), count)) for name in "agb"}
    for variable, x_low, x_high in zip(model.variables, low, high, strict=True):
        h = _stage_factor(model, variable)[:count]
        sums[ROLE_SUM[variable.role]][variable.stage] += choose(h * x_low, h * x_high)
    return sums


ROLE_SUM = {"input_offset": "a", "gain": "g", "output_offset": "b", "nonlinearity": "b"}


def _stage_factor(model: Model, variable: Variable) -> Array:
    """Factor that turns a variable into its part of a, g or b (nonlinearity: times the span)."""
    span = float(model.spans[variable.stage]) if variable.role == "nonlinearity" else 1.0
    return variable.factor * span


# ---------------------------------------------------------------------------------------------
# Vertex search


class _Search:
    """Exact errors and their gradients for rows of variable values; one row a point, shape (points, variables)."""

    def __init__(self, model: Model) -> None:
        self.model = model
        self.count = len(model.points)
        self.sites = model.nominal.shape[0]
        self.factors = np.stack([_stage_factor(model, variable) for variable in model.variables], axis=1)
        self.columns = [
            {
                name: [j for j, x in enumerate(model.variables) if x.stage == i and ROLE_SUM[x.role] == name]
                for name in "agb"
            }
            for i in range(len(model.stages))
        ]

    def site_rows(self, site: int | None) -> tuple[Array, Array]:
        """Factors and nominal signals: each row's own operating point, or one calibration site for all rows."""
        rows = slice(0, self.count) if site is None else slice(site, site + 1)
        return self.factors[rows], self.model.nominal[rows]

    def run(self, x: Array, site: int | None) -> tuple[Array, Array]:
        """Output deviation (points,) and its gradient (points, variables) at one kind of site."""
        h, v = self.site_rows(site)
        d, steps = np.zeros(x.shape[0]), []
        for i, gain in enumerate(self.model.gains):
            a, g, b = (np.sum((x * h)[:, self.columns[i][name]], axis=1) for name in "agb")
            steps.append((d + a + v[:, i], g))
            d = advance(d, v[:, i], float(gain), a, g, b)
        gradient, tail = np.zeros_like(x), np.ones(x.shape[0])
        for i in range(len(steps) - 1, -1, -1):
            signal, g = steps[i]
            gain = float(self.model.gains[i])
            for name, factor in (("b", tail), ("g", tail * gain * signal), ("a", tail * gain * (1.0 + g))):
                columns = self.columns[i][name]
                gradient[:, columns] = factor[:, None] * (h * np.ones_like(x))[:, columns]
            tail = tail * gain * (1.0 + g)
        return d, gradient

    def error(self, x: Array) -> tuple[Array, Array]:
        """Referred, calibrated error (points,) and its gradient (points, variables)."""
        runs = [self.run(x, None)] + [self.run(x, site) for site in range(self.count, self.sites)]
        calibration = self.model.calibration
        e, gradient = runs[0][0].copy(), runs[0][1].copy()
        if calibration is not None:
            for k, (d, slope) in enumerate(runs[1:]):
                w = calibration.weights[:, k]
                e -= w * d
                gradient -= w[:, None] * slope
            if calibration.step is not None:
                q = 1.0 + (runs[2][0] - runs[1][0]) / calibration.step
                e = e / q
                gradient = (gradient - e[:, None] * (runs[2][1] - runs[1][1]) / calibration.step) / q[:, None]
        return e / self.model.referral, gradient / self.model.referral


def _by_search(
    model: Model, S: Array, start: Array, low: Array, high: Array, paths: list[Path], direction: float
) -> Array:
    """Largest (direction 1) or smallest (-1) exact error at each point, from first-order vertices on.

    Variables without a first-order effect may have one beside others (an offset and a gain drift after calibration):
    they start at their lower ends once and at their upper ends once.
    """
    search = _Search(model)
    idle = np.abs(S) <= IDLE * np.abs(S).max(axis=1, keepdims=True)
    for path in paths:
        idle[:, path.members] = False
    found = [_climb(search, np.where(idle, end, start), low, high, paths, direction) for end in (low, high)]
    return np.asarray(np.max(found, axis=0) if direction > 0.0 else np.min(found, axis=0))


def _climb(search: _Search, start: Array, low: Array, high: Array, paths: list[Path], direction: float) -> Array:
    """Follow the signs of the gradient from a vertex until no step helps; gives the error there."""
    x = start.copy()
    free = np.ones(x.shape[1], dtype=bool)
    for path in paths:
        free[path.members] = False
    best, slope = search.error(x)
    for _ in range(SWEEPS):
        target = np.where(free & (direction * slope > 0.0), high, np.where(free & (direction * slope < 0.0), low, x))
        trial = target.copy()
        for path in paths:
            _follow(search, trial, path, direction)
        moved = _keep_better(search, x, best, trial, direction)
        # where all steps together don't help, the most promising one alone does (two may undo each other)
        gain = direction * slope * (target - x)
        rows = np.arange(x.shape[0])
        single = x.copy()
        choice = np.argmax(gain, axis=1)
        single[rows, choice] = target[rows, choice]
        single[moved] = x[moved]
        if not (_keep_better(search, x, best, single, direction) | moved).any():
            return best
        slope = search.error(x)[1]
    return best


def _keep_better(search: _Search, x: Array, best: Array, trial: Array, direction: float) -> NDArray[np.bool_]:
    """Take over, in place, the rows of a trial that are better; tells which."""
    e = search.error(trial)[0]
    better = direction * (e - best) > 1e-14 * np.abs(best)
    x[better], best[better] = trial[better], e[better]
    return better


def _follow(search: _Search, x: Array, path: Path, direction: float) -> None:
    """Move the members of one cause, in place, to the best position along their path at each point.

    Where the error rises (or falls) at both ends of a straight path, that end is the best position.
    """
    rows = x.shape[0]
    if path.straight:
        ends = path.values(np.array([0.0, 1.0]))
        slopes = []
        for end in ends:
            x[:, path.members] = end
            slopes.append(direction * np.sum(search.error(x)[1][:, path.members] * (ends[1] - ends[0]), axis=1))
        if np.all(slopes[0] * slopes[1] > 0.0):
            x[:, path.members] = np.where(slopes[0][:, None] > 0.0, ends[1], ends[0])
            return
    centre, reach = np.full(rows, 0.5), 0.5
    for _ in range(REFINEMENTS):
        u = np.clip(centre[:, None] + reach * np.linspace(-1.0, 1.0, PATH_STEPS), 0.0, 1.0)
        values, gains = path.values(u), np.empty_like(u)
        for step in range(u.shape[1]):
            x[:, path.members] = values[:, step]
            gains[:, step] = direction * search.error(x)[0]
        best = np.argmax(gains, axis=1)
        centre = u[np.arange(rows), best]
        x[:, path.members] = values[np.arange(rows), best]
        reach *= 4.0 / (PATH_STEPS - 1)
        if reach < 1e-9:  # an extreme inside the path is flat: its value is exact to the square of this
            return
