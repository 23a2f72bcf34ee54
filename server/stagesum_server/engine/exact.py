"""Convolution: the exact law of the first-order error at each operating point."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from stagesum_server.engine import correlation
from stagesum_server.engine.characteristic import Path, Term
from stagesum_server.engine.convolution import NoExactLawError, sum_law
from stagesum_server.engine.laws import Normal

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from stagesum_server.engine.chain import Model
    from stagesum_server.engine.correlation import Cause, Cluster
    from stagesum_server.engine.sum_law import SumLaw

    Array = NDArray[np.float64]


def error_laws(model: Model, S: Array, clusters: tuple[Cluster, ...]) -> list[SumLaw]:
    """Law of the error at every point; S has shape (points, variables).

    Raises
    ------
    NoExactLawError
        Where sources that aren't all normal are partly correlated, and for what ``sum_law`` can't do.

    """
    clustered = {member for cluster in clusters for member in cluster.members}
    free = [j for j in range(S.shape[1]) if j not in clustered]
    found = []
    for row in S:
        terms = [Term(float(row[j]), model.variables[j].law) for j in free if row[j] != 0.0]
        offset = 0.0
        paths: list[Path] = []
        for cluster in clusters:
            more, shift, along = _of_cluster(model, row, cluster)
            terms, offset, paths = terms + more, offset + shift, paths + along
        found.append(sum_law(terms, offset, tuple(paths)))
    return found


def _of_cluster(model: Model, s: Array, cluster: Cluster) -> tuple[list[Term], float, list[Path]]:
    """A cluster as independent terms, a shift, and paths of mixed shape."""
    variables = model.variables
    if len(cluster.causes) == 1:
        return _of_cause(model, s, cluster.causes[0])
    members = list(cluster.members)
    if not all(isinstance(variables[j].law, Normal) for j in members):
        raise NoExactLawError(
            "partly correlated sources that aren't all normal have no exact law here; Monte Carlo is the method"
        )
    C = correlation.covariance(cluster, variables)
    mean = float(np.sum(s[members] * np.array([variables[j].law.mean for j in members])))
    variance = float(np.sum(s[members][:, None] * C * s[members]))
    sigma = math.sqrt(max(variance, 0.0))
    return ([Term(1.0, Normal(mean, sigma, mean, mean))], 0.0, []) if sigma > 0.0 else ([], mean, [])


def _of_cause(model: Model, s: Array, cause: Cause) -> tuple[list[Term], float, list[Path]]:
    """One cause: a single term where all members are straight-line images of each other, else its path."""
    variables = [model.variables[j] for j in cause.members]
    if cause.same_path(model.variables):
        first = variables[0].law
        c = math.fsum(
            float(s[j]) * sign * cause.signs[0] * variable.law.sigma / first.sigma
            for j, sign, variable in zip(cause.members, cause.signs, variables, strict=True)
        )
        means = math.fsum(float(s[j]) * v.law.mean for j, v in zip(cause.members, variables, strict=True))
        return [Term(c, first)], means - c * first.mean, []
    z, weights = correlation.score_nodes(tuple(kink for variable in variables for kink in variable.single.kinks))
    values = np.zeros_like(z)
    for j, sign, variable in zip(cause.members, cause.signs, variables, strict=True):
        values += s[j] * variable.single.from_scores(z * sign)
    readings = variables[0].readings
    return [], 0.0, [Path(values / readings, weights)] * readings
