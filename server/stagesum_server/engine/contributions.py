"""What contributes: each source's part in the first-order bound and in the variance."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np
from stagesum_schemas.records import Contribution, Largest, VarianceParts

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from stagesum_server.engine.chain import Model
    from stagesum_server.engine.rss import Propagation
    from stagesum_server.engine.worst_case import Extremes

    Array = NDArray[np.float64]


def bounds(extremes: Extremes) -> Array:
    """First-order bound of each variable at each point: its part of the side that is farther from zero.

    Members of a merged cause keep the sign of their part, so that their bounds add up to the cause's; shape
    (points, variables).
    """
    lower, upper = extremes.first_lower, extremes.first_upper
    return np.where((-lower.sum(axis=1) > upper.sum(axis=1))[:, None], -lower, upper)


def contributions(model: Model, S: Array, extremes: Extremes, rss: Propagation, p: int) -> tuple[Contribution, ...]:
    """Contributions at point ``p``, sorted by their share of the variance, largest first."""
    owner = np.array([variable.source for variable in model.variables])
    bound = _by_source(bounds(extremes), owner, len(model.sources))
    variance = _by_source(rss.variance, owner, len(model.sources))
    sigma = np.array([variable.law.sigma for variable in model.variables])
    own = np.sqrt(_by_source((S * sigma) ** 2, owner, len(model.sources)))
    sensitivity = [S[p, int(np.flatnonzero(owner == j)[0])] for j in range(len(model.sources))]
    rows = [
        _contribution(model, j, float(sensitivity[j]), p, bound, own[:, j], _share(variance[p], j))
        for j in range(len(model.sources))
    ]
    return tuple(sorted(rows, key=lambda row: (-row.variance_share, -row.bound_share)))


def _by_source(columns: Array, owner: NDArray[np.intp], count: int) -> Array:
    """Sum columns of variables into columns of sources."""
    totals = np.zeros((columns.shape[0], count))
    for column, source in enumerate(owner):
        totals[:, source] += columns[:, column]
    return totals


def _share(values: Array, j: int) -> float:
    total = float(values.sum())
    return float(values[j]) / total if total > 0.0 else 0.0


def _contribution(
    model: Model, j: int, sensitivity: float, p: int, bound: Array, own: Array, variance_share: float
) -> Contribution:
    source = model.sources[j]
    top = int(np.argmax(np.abs(bound[:, j])))
    return Contribution(
        stage=source.owner,
        source=source.name,
        effect=source.effect,
        shape=source.law.shape,
        source_unit=source.unit,
        mean=source.law.mean,
        sigma=source.law.sigma,
        bounds=(source.law.lower, source.law.upper),
        reading=source.reading,
        varies_by=source.varies_by,
        sensitivity=sensitivity,
        bound=float(bound[p, j]),
        bound_share=_share(bound[p], j),
        contribution_sigma=float(own[p]),
        variance_share=variance_share,
        largest=Largest(point=top, bound=float(bound[top, j]), sigma=float(own[top])),
    )


def variance_parts(model: Model, rss: Propagation, p: int) -> VarianceParts:
    """Shares of the variance at one point that are a built unit's own, and new at every reading."""
    reading = np.array([variable.reading for variable in model.variables])
    total = float(rss.variance[p].sum())
    share = float(rss.variance[p][reading].sum()) / total if total > 0.0 else 0.0
    return VarianceParts(unit=1.0 - share if total > 0.0 else 0.0, reading=share)
