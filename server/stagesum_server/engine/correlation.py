"""Dependence between variables: one cause at +-1, a Gaussian copula in between.

Coefficients of exactly +-1 merge sources into one *cause*: every member follows the same random
number (comonotone, or mirrored). Causes with a partial coefficient form a *cluster*: their normal
scores have the given correlation matrix R, and each source is its law's value at its score.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from stagesum_server.engine.laws import Normal

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from stagesum_server.engine.chain import Correlation, Model, Variable
    from stagesum_server.engine.laws import Law

    Array = NDArray[np.float64]

SEMIDEFINITE_TOLERANCE = 1e-9  # smallest eigenvalue of a correlation matrix that rounding alone explains
HERMITE_TERMS = 200
MOST_KINKS = 500
SCORE_LIMIT = 9.0  # normal scores beyond carry less than 1e-18 of the probability


class ContradictionError(ValueError):
    """Correlations that no joint law can have; ``positions`` are their places in the request."""

    def __init__(self, positions: tuple[int, ...], detail: str) -> None:
        super().__init__(detail)
        self.positions, self.detail = positions, detail


@dataclass(frozen=True)
class Cause:
    """Variables that follow one random number; ``signs`` tells mirrored ones (-1)."""

    members: tuple[int, ...]
    signs: tuple[int, ...]

    def same_path(self, variables: tuple[Variable, ...]) -> bool:
        """Whether all members are straight-line images of each other, so that they merge into one source."""
        singles = [variables[member].single for member in self.members]
        mirrored = len(set(self.signs)) > 1
        return len({law.family for law in singles}) == 1 and (not mirrored or singles[0].symmetric)


@dataclass(frozen=True)
class Cluster:
    """Causes with the correlation matrix R of their normal scores, shape (causes, causes)."""

    causes: tuple[Cause, ...]
    R: Array

    @cached_property
    def members(self) -> tuple[int, ...]:
        """All variables of the cluster."""
        return tuple(member for cause in self.causes for member in cause.members)

    @cached_property
    def root(self) -> Array:
        """A matrix L with L L' = R, also where R is only semidefinite (from its eigenvectors)."""
        values, vectors = np.linalg.eigh(self.R)
        return np.asarray(vectors * np.sqrt(np.clip(values, 0.0, None)))


def clusters_of_sources(count: int, correlations: tuple[Correlation, ...]) -> tuple[Cluster, ...]:
    """Group ``count`` sources into causes and clusters; independent sources are in none.

    Raises
    ------
    ContradictionError
        Where the correlation matrix isn't positive semidefinite; names the positions of the pairs.

    """
    stated = {frozenset((c.first, c.second)): c for c in correlations}
    root, sign = _merge(count, correlations)
    between: dict[frozenset[int], float] = {}
    for c in correlations:
        a, b = root[c.first], root[c.second]
        if c.coefficient == 0.0:
            continue
        value = c.coefficient * sign[c.first] * sign[c.second]
        if a == b:
            if not math.isclose(value, 1.0):
                raise ContradictionError((c.position,), _contradiction(c))
        elif between.setdefault(frozenset((a, b)), value) != value:
            raise ContradictionError((c.position,), _contradiction(c))
    touched = {index for pair in stated for index in pair if stated[pair].coefficient != 0.0}
    groups = _components({root[i] for i in touched}, between)
    return tuple(_cluster(group, touched, root, sign, between, correlations) for group in groups)


def _contradiction(c: Correlation) -> str:
    return (
        f"coefficient {c.coefficient:g} contradicts the others: the two sources are tied to each other by "
        "coefficients of +-1 elsewhere in the list, so it must agree with them"
    )


def _merge(count: int, correlations: tuple[Correlation, ...]) -> tuple[list[int], list[int]]:
    """Union of sources tied by +-1: each source's representative and its sign relative to it."""
    root, sign = list(range(count)), [1] * count
    for c in correlations:
        if abs(c.coefficient) == 1.0 and root[c.first] != root[c.second]:
            keep, gone = root[c.first], root[c.second]
            turn = int(c.coefficient) * sign[c.first] * sign[c.second]
            for i in range(count):
                if root[i] == gone:
                    root[i], sign[i] = keep, sign[i] * turn
    return root, sign


def _components(nodes: set[int], between: dict[frozenset[int], float]) -> list[list[int]]:
    """Connected components of the causes, each sorted, in order of their first member."""
    label = {node: node for node in nodes}
    for pair in between:
        a, b = sorted(label[node] for node in pair)
        label = {node: (a if mark == b else mark) for node, mark in label.items()}
    return [sorted(n for n in nodes if label[n] == mark) for mark in sorted(set(label.values()))]


def _cluster(
    group: list[int],
    touched: set[int],
    root: list[int],
    sign: list[int],
    between: dict[frozenset[int], float],
    correlations: tuple[Correlation, ...],
) -> Cluster:
    causes = []
    for node in group:
        members = tuple(sorted(i for i in touched if root[i] == node))
        causes.append(Cause(members, tuple(sign[i] for i in members)))
    R = np.eye(len(group))
    for i, a in enumerate(group):
        for j, b in enumerate(group[:i]):
            R[i, j] = R[j, i] = between.get(frozenset((a, b)), 0.0)
    smallest = float(np.linalg.eigvalsh(R)[0])
    if smallest < -SEMIDEFINITE_TOLERANCE:
        inside = {i for cause in causes for i in cause.members}
        positions = tuple(c.position for c in correlations if c.first in inside)
        raise ContradictionError(
            positions,
            f"the correlation matrix of these sources has the eigenvalue {smallest:.3g}; it must be positive semidefinite, "
            "so bring the coefficients nearer to zero or state the missing ones",
        )
    return Cluster(tuple(causes), R)


def clusters(model: Model) -> tuple[Cluster, ...]:
    """Clusters of the model's variables: of the unit ones, and for readings of those taken together."""
    places: dict[tuple[int, int], int] = {}
    for index, variable in enumerate(model.variables):
        places[variable.source, _occasion(model, variable)] = index
    found = []
    for cluster in clusters_of_sources(len(model.sources), model.correlations):
        for occasion in sorted({o for s, o in places if s in cluster.members}):
            found += _on_occasion(cluster, places, occasion)
    return tuple(found)


def _occasion(model: Model, variable: Variable) -> int:
    """When a variable is drawn: -2 once a unit, -1 at each operating point, else at that calibration site."""
    if not variable.reading:
        return -2
    return -1 if variable.per_point else int(np.flatnonzero(variable.factor)[0])


def _on_occasion(cluster: Cluster, places: dict[tuple[int, int], int], occasion: int) -> list[Cluster]:
    """The cluster's variables of one occasion; sources that take no part in it are left out."""
    causes, rows = [], []
    for row, cause in enumerate(cluster.causes):
        present = [(m, s) for m, s in zip(cause.members, cause.signs, strict=True) if (m, occasion) in places]
        if present:
            causes.append(Cause(tuple(places[m, occasion] for m, _ in present), tuple(s for _, s in present)))
            rows.append(row)
    return [Cluster(tuple(causes), cluster.R[np.ix_(rows, rows)])] if causes else []


# ---------------------------------------------------------------------------------------------
# The covariance that the joint law has


def covariance(cluster: Cluster, variables: tuple[Variable, ...]) -> Array:
    """Covariance matrix of a cluster's variables in the order of ``cluster.members``; shape (members, members)."""
    entries = [
        (row, m, s) for row, cause in enumerate(cluster.causes) for m, s in zip(cause.members, cause.signs, strict=True)
    ]
    C = np.empty((len(entries), len(entries)))
    for i, (row_i, m_i, s_i) in enumerate(entries):
        for j, (row_j, m_j, s_j) in enumerate(entries[: i + 1]):
            first, second = variables[m_i], variables[m_j]
            rho = float(cluster.R[row_i, row_j]) * s_i * s_j
            if i == j:
                value = first.law.sigma**2
            else:
                share = pearson(first.single, second.single, rho)
                value = share * first.law.sigma * second.law.sigma
            C[i, j] = C[j, i] = value
    return C


def pearson(first: Law, second: Law, rho: float) -> float:
    """Linear correlation of two laws whose normal scores have the correlation ``rho``.

    It is ``rho`` itself for normal laws. Else from the expansion of both in Hermite polynomials of the score,
    cov = sum a_m b_m rho^m (Mehler's formula); what is left of the sum beyond the last term is known from the
    comonotone covariance.
    """
    if isinstance(first, Normal) and isinstance(second, Normal):
        return rho
    if first.family == second.family and (rho == 1.0 or (rho == -1.0 and first.symmetric)):
        return rho
    z, w = score_nodes(first.kinks + second.kinks)
    a, b = first.from_scores(z) - first.mean, second.from_scores(z) - second.mean
    mirrored = second.from_scores(-z) - second.mean
    whole = float(np.sum(w * a * (b if rho >= 0.0 else mirrored)))
    terms = _hermite_terms(z, w, a) * _hermite_terms(z, w, b)
    powers = rho ** np.arange(1, terms.size + 1)
    signs = np.sign(rho) ** np.arange(1, terms.size + 1)
    rest = whole - float(np.sum(terms * signs))
    value = float(np.sum(terms * powers)) + rest * abs(rho) ** (terms.size + 1)
    return value / (first.sigma * second.sigma)


def score_nodes(kinks: tuple[float, ...]) -> tuple[Array, Array]:
    """Gauss-Legendre nodes over the normal score, in panels that end at the laws' kinks, and normal weights."""
    if len(kinks) > MOST_KINKS:  # so many small bends are smooth to the quadrature
        kinks = ()
    edges = np.unique(np.concatenate([np.linspace(-SCORE_LIMIT, SCORE_LIMIT, 73), special.ndtri(np.array(kinks))]))
    edges = edges[np.isfinite(edges)]
    nodes, weights = np.polynomial.legendre.leggauss(16)
    middle, half = 0.5 * (edges[1:] + edges[:-1]), 0.5 * (edges[1:] - edges[:-1])
    z = (middle[:, None] + half[:, None] * nodes).ravel()
    w = (half[:, None] * weights).ravel() * np.exp(-0.5 * z * z) / math.sqrt(2.0 * math.pi)
    return z, w


def _hermite_terms(z: Array, w: Array, values: Array) -> Array:
    """Coefficients of ``values`` in orthonormal Hermite polynomials of degree 1 to HERMITE_TERMS."""
    before, now = np.ones_like(z), z
    found = np.empty(HERMITE_TERMS)
    for m in range(1, HERMITE_TERMS + 1):
        found[m - 1] = np.sum(w * values * now)
        before, now = now, (z * now - math.sqrt(m) * before) / math.sqrt(m + 1)
    return found
