"""Draws of all variables, block by block, carried through the exact chain.

A block's random stream depends on the seed and the block's number alone, and its arithmetic on
nothing but numpy's elementwise operations in a fixed order: the same seed gives the same bytes for
any number of threads, workers or machines. Work goes through small sub-blocks that stay in the
processor's cache.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from stagesum_server.engine.chain import calibrated
from stagesum_server.engine.laws import Averaged

if TYPE_CHECKING:
    from collections.abc import Iterator

    from numpy.typing import NDArray

    from stagesum_server.engine.chain import Model, Variable
    from stagesum_server.engine.correlation import Cluster

    Array = NDArray[np.float64]
    Drawn = dict[tuple[int, int], Array]  # by variable and site; site -1 where all sites share the draw

BLOCK = 65_536  # trials that share one random stream
SUB_BLOCK = 16_384  # trials worked on at once: larger leaves the cache, smaller pays for numpy's calls


@dataclass(frozen=True)
class _Part:
    """One variable's way into its stage: which sum it enters and by which factor at which site."""

    index: int
    sum: str
    common: float | None
    sites: tuple[tuple[int, float], ...]
    size: float
    offset: float


class Sampler:
    """Draws errors of the exact chain; one object serves all threads, scratch arrays are made per block."""

    def __init__(self, model: Model, clusters: tuple[Cluster, ...], seed: int, *, all_given: bool = False) -> None:
        self.model, self.clusters, self.seed = model, clusters, seed
        self.clustered = {member for cluster in clusters for member in cluster.members}
        if all_given:  # every value will be handed to ``propagate``
            self.clustered = set(range(len(model.variables)))
        self.parts: list[list[_Part]] = [[] for _ in model.stages]
        for index, variable in enumerate(model.variables):
            self.parts[variable.stage].append(_part(model, index, variable))

    def errors(self, block: int, trials: int) -> Iterator[Array]:
        """Yield errors at the referred node, shape (points, up to SUB_BLOCK), ``trials`` in all."""
        rng = np.random.Generator(np.random.SFC64(np.random.SeedSequence(self.seed, spawn_key=(block,))))
        for start in range(0, trials, SUB_BLOCK):
            yield self._sub_block(rng, min(SUB_BLOCK, trials - start))

    def _sub_block(self, rng: np.random.Generator, size: int) -> Array:
        return self.propagate(self.draw_clusters(rng, size), rng, size)

    def propagate(self, drawn: Drawn, rng: np.random.Generator, size: int) -> Array:
        """Carry values through the chain: those in ``drawn``, all others drawn on the way; (points, size)."""
        nominal, gains = self.model.nominal, self.model.gains
        d = np.zeros((nominal.shape[0], size))
        x, scratch = np.empty(size), np.empty(size)
        for i, parts in enumerate(self.parts):
            sums = _StageSums(d.shape)
            for part in parts:
                self._add(part, sums, drawn, rng, x, scratch)
            _advance_in_place(d, nominal[:, i], float(gains[i]), sums, scratch)
        return calibrated(d, self.model)

    def _add(
        self,
        part: _Part,
        sums: _StageSums,
        drawn: Drawn,
        rng: np.random.Generator,
        x: Array,
        scratch: Array,
    ) -> None:
        variable = self.model.variables[part.index]
        if part.common is not None and part.index not in self.clustered:
            variable.law.draw_standard(rng, x)
            sums.add_common(part.sum, x, part.common * part.size, part.common * part.offset, scratch)
            return
        fresh = part.index not in self.clustered
        if fresh and not variable.per_point:
            variable.law.draw(rng, x)
        for site, factor in part.sites:
            if not fresh:
                source = drawn[part.index, site if variable.per_point else -1]
            else:
                source = x
                if variable.per_point:
                    variable.law.draw(rng, x)
            sums.add_at(part.sum, site, source, factor, scratch)

    def draw_clusters(self, rng: np.random.Generator, size: int) -> Drawn:
        """Values of clustered variables, keyed by (variable, site), site -1 where all sites share the draw."""
        drawn: Drawn = {}
        for cluster in self.clusters:
            first = self.model.variables[cluster.members[0]]
            for site in range(len(self.model.points)) if first.per_point else (-1,):
                for member, values in self._draw_cluster(cluster, rng, size):
                    drawn[member, site] = values
        return drawn

    def _draw_cluster(self, cluster: Cluster, rng: np.random.Generator, size: int) -> list[tuple[int, Array]]:
        """One joint draw of a cluster, the mean of several where its readings are averaged one by one."""
        variables = [self.model.variables[member] for member in cluster.members]
        by_draws = isinstance(variables[0].law, Averaged)
        repeats = variables[0].readings if by_draws else 1
        total = [np.zeros(size) for _ in variables]
        for _ in range(repeats):
            rows = iter(total)
            for cause, z in zip(cluster.causes, _scores(cluster.root, rng, size), strict=True):
                for member, sign in zip(cause.members, cause.signs, strict=True):
                    variable = self.model.variables[member]
                    law = variable.single if by_draws else variable.law
                    row = next(rows)
                    row += law.from_scores(z if sign > 0 else -z)
        return [(member, row / repeats) for member, row in zip(cluster.members, total, strict=True)]


class _StageSums:
    """The sums a, g, b of one stage: what all sites share, and what is each site's own."""

    def __init__(self, shape: tuple[int, ...]) -> None:
        self.shape = shape
        self.common: dict[str, Array] = {}
        self.own: dict[str, dict[int, Array]] = {"a": {}, "g": {}, "b": {}}

    def add_common(self, name: str, x: Array, factor: float, shift: float, scratch: Array) -> None:
        """Add ``factor * x + shift`` at every site."""
        if name in self.common:
            np.multiply(x, factor, out=scratch)
            self.common[name] += scratch
        else:
            self.common[name] = x * factor
        if shift != 0.0:
            self.common[name] += shift

    def add_at(self, name: str, site: int, x: Array, factor: float, scratch: Array) -> None:
        """Add ``factor * x`` at one site."""
        own = self.own[name]
        if site not in own:
            own[site] = x * factor
            return
        np.multiply(x, factor, out=scratch)
        own[site] += scratch

    def at(self, name: str, site: int) -> list[Array]:
        """The arrays that make up a sum at one site."""
        return [part for part in (self.common.get(name), self.own[name].get(site)) if part is not None]


def _advance_in_place(d: Array, v: Array, gain: float, sums: _StageSums, scratch: Array) -> None:
    """Carry d (sites, trials) through one stage: d = G [(d + a) + ((d + a) + v) g] + b, as ``chain.advance``."""
    for site in range(d.shape[0]):
        row = d[site]
        for a in sums.at("a", site):
            row += a
        gains = sums.at("g", site)
        if gains:
            np.add(row, v[site], out=scratch)
            scratch *= gains[0] if len(gains) == 1 else gains[0] + gains[1]
            row += scratch
        if gain != 1.0:
            row *= gain
        for b in sums.at("b", site):
            row += b


def _part(model: Model, index: int, variable: Variable) -> _Part:
    name = {"input_offset": "a", "gain": "g"}.get(variable.role, "b")
    span = float(model.spans[variable.stage]) if variable.role == "nonlinearity" else 1.0
    factors = variable.factor * span
    sites = tuple((int(site), float(factors[site])) for site in np.flatnonzero(factors))
    shared = not variable.per_point and len(sites) == factors.size and len({factor for _, factor in sites}) == 1
    return _Part(index, name, sites[0][1] if shared else None, sites, *variable.law.standard)


def _scores(root: Array, rng: np.random.Generator, size: int) -> list[Array]:
    """Correlated normal scores, one row a cause, summed in a fixed order (no library's matrix product)."""
    independent = [rng.standard_normal(size) for _ in range(root.shape[0])]
    rows = []
    for weights in root:
        z = np.zeros(size)
        for weight, part in zip(weights, independent, strict=True):
            z += weight * part
        rows.append(z)
    return rows
