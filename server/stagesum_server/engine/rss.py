"""Law of propagation of uncertainty (JCGM 100:2008, 5.1.2 and 5.2.2): root sum of squares."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from stagesum_server.engine.correlation import covariance

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from stagesum_server.engine.chain import Model
    from stagesum_server.engine.correlation import Cluster

    Array = NDArray[np.float64]


@dataclass(frozen=True)
class Propagation:
    """Mean, standard deviation, coverage factor and effective degrees of freedom at each point, all (points,).

    ``variance`` (points, variables) is each variable's part of u_c^2, covariances included: rows add up to u_c^2.
    """

    mean: Array
    sigma: Array
    factor: Array
    dof: Array
    variance: Array

    @property
    def lower(self) -> Array:
        """Lower end of the interval before it is cut at the worst case."""
        return self.mean - self.factor * self.sigma

    @property
    def upper(self) -> Array:
        """Upper end of the interval before it is cut at the worst case."""
        return self.mean + self.factor * self.sigma


def propagate(model: Model, S: Array, clusters: tuple[Cluster, ...]) -> Propagation:
    """Propagate means and covariances: mean = S mu, u_c^2 = s' C s; S has shape (points, variables)."""
    laws = [variable.law for variable in model.variables]
    mean = np.sum(S * np.array([law.mean for law in laws]), axis=1)
    sigma = np.array([law.sigma for law in laws])
    variance = (S * sigma) ** 2
    for cluster in clusters:
        members = list(cluster.members)
        s = S[:, members]
        C = covariance(cluster, model.variables)
        variance[:, members] = s * np.sum(s[:, None, :] * C, axis=2)
    total = np.maximum(np.sum(variance, axis=1), 0.0)
    dof = _effective_dof(model, S * sigma, clusters, total)
    return Propagation(mean, np.sqrt(total), _coverage_factor(model, dof), dof, variance)


def _effective_dof(model: Model, u: Array, clusters: tuple[Cluster, ...], total: Array) -> Array:
    """Welch-Satterthwaite (JCGM 100:2008, G.4.1): u_c^4 / sum u_i^4 / dof_i; infinite where no source states dof.

    A merged cause counts once, with its members' sum and their smallest dof. A student_t law carries its wide
    tails in its sigma already and doesn't count.
    """
    stated = [model.sources[variable.source] for variable in model.variables]
    weight = np.array([1.0 / s.dof if s.dof and s.law.shape != "student_t" else 0.0 for s in stated])
    fourth = np.sum(u**4 * weight, axis=1)
    for cause in (cause for cluster in clusters for cause in cluster.causes if len(cause.members) > 1):
        members = list(cause.members)
        fourth -= np.sum(u[:, members] ** 4 * weight[members], axis=1)
        fourth += np.sum(u[:, members] * np.array(cause.signs), axis=1) ** 4 * weight[members].max()
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.where(fourth > 0.0, total**2 / fourth, np.inf)


def _coverage_factor(model: Model, dof: Array) -> Array:
    """K as given, else from the coverage: normal, or Student t where the degrees of freedom are finite."""
    if model.coverage_factor is not None:
        return np.full(dof.shape, model.coverage_factor)
    tail = 0.5 * (1.0 - model.coverage)
    normal = -float(special.ndtri(tail))
    finite = np.isfinite(dof)
    return np.where(finite, -special.stdtrit(np.where(finite, dof, 1.0), tail), normal)


def outside(propagation: Propagation, lower: Array, upper: Array) -> Array:
    """Share outside the limits by the normal law, or Student t where the degrees of freedom are finite; (points,)."""
    below, above = lower - propagation.mean, propagation.mean - upper
    with np.errstate(divide="ignore", invalid="ignore"):
        scores = np.stack([below / propagation.sigma, above / propagation.sigma])
    # without spread the error is its mean: wholly inside (a limit included) or wholly outside
    scores = np.where(np.isnan(scores), -np.inf, scores)
    finite = np.isfinite(propagation.dof)
    by_t = special.stdtr(np.where(finite, propagation.dof, 1.0), np.clip(scores, -1e300, 1e300))
    return np.asarray(np.sum(np.where(finite, by_t, special.ndtr(scores)), axis=0))
