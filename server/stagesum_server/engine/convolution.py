"""The exact law of a first-order sum: picks the form that is exact and fast for the terms at hand."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np

from stagesum_server.engine import laws
from stagesum_server.engine.characteristic import Path, Term, Transform
from stagesum_server.engine.hard_sums import (
    AtomMixture,
    ConditionedLaw,
    DiscreteLaw,
    ScaleMixture,
    TooManyAtomsError,
    merge_atoms,
)
from stagesum_server.engine.sum_law import MANY, MOST, TOLERANCE, SeriesLaw, SingleLaw, SumLaw, frequencies_needed

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Array = NDArray[np.float64]

MOST_TAKEN_APART = 2  # sources that are split off a sum: each costs a hundredfold
UNCUT_SIGMAS = 12.0  # a normal law cut beyond this is a normal law: 4e-33 is missing
FARTHEST_CUT = 20.0  # sigmas; a cut on one side that is farther out only widens the support
NEGLIGIBLE = 1e-14  # terms narrower than this share of the sum's sigma only shift it


class NoExactLawError(ValueError):
    """A sum for which no exact law is known here; the message says why."""


def sum_law(terms: list[Term], offset: float = 0.0, paths: tuple[Path, ...] = (), taken_apart: int = 0) -> SumLaw:
    """Give the law of ``offset`` plus the sum of independent terms (and of ``paths``, causes of mixed shape).

    ``taken_apart`` counts how many sources have been split off a sum already.

    Raises
    ------
    NoExactLawError
        For two Student t sources, or more atoms than can be enumerated, where the sum isn't smooth without them.

    """
    flat = [part for term in terms for part in flatten(term)]
    sigma = math.sqrt(sum((t.coefficient * t.law.sigma) ** 2 for t in flat) + sum(path.sigma**2 for path in paths))
    kept = [t for t in flat if abs(t.coefficient) * t.law.sigma > NEGLIGIBLE * sigma]
    offset += math.fsum(t.coefficient * t.law.mean for t in flat if t not in kept) if len(kept) < len(flat) else 0.0
    kept = _merge_normals(kept)
    if not kept and not paths:
        return DiscreteLaw(np.zeros(1), np.ones(1), offset)
    if len(kept) == 1 and not paths:
        return SingleLaw(kept[0], offset)
    heavy = [t for t in kept if isinstance(t.law, laws.StudentT)]
    if heavy:
        return _with_student(heavy, kept, offset, paths, sigma)
    transform = Transform(kept, paths)
    K = frequencies_needed(transform)
    few = len(kept) + len(paths) <= 2
    if (MANY if few or taken_apart else MOST) >= K:
        mean = offset + math.fsum(t.coefficient * t.law.mean for t in kept) + sum(path.mean for path in paths)
        return SeriesLaw(transform, offset, mean, sigma, K)
    if taken_apart == MOST_TAKEN_APART:
        raise NoExactLawError(f"its series falls too slowly for an error of {TOLERANCE:g}; Monte Carlo is the method")
    return _hard(kept, offset, paths, taken_apart)


def flatten(term: Term) -> list[Term]:
    """A mean of n readings is n terms of 1/n; cuts that take nothing away aren't kept."""
    law = term.law
    if isinstance(law, laws.Averaged):
        return flatten(Term(term.coefficient / law.readings, law.single)) * law.readings
    if isinstance(law, laws.TruncatedNormal) and law.cuts[0] < 0.0 < law.cuts[1]:
        if min(-law.cuts[0], law.cuts[1]) > UNCUT_SIGMAS:
            return [Term(term.coefficient, laws.Normal(law.m, law.s, law.lower, law.upper))]
        near, far = law.m - FARTHEST_CUT * law.s, law.m + FARTHEST_CUT * law.s
        if law.lower < near or law.upper > far:
            return [
                Term(term.coefficient, laws.TruncatedNormal(law.m, law.s, max(law.lower, near), min(law.upper, far)))
            ]
    return [term]


def _merge_normals(terms: list[Term]) -> list[Term]:
    """All normal terms are one."""
    normal = [t for t in terms if isinstance(t.law, laws.Normal)]
    if len(normal) < 2:
        return terms
    mean = math.fsum(t.coefficient * t.law.mean for t in normal)
    sigma = math.sqrt(math.fsum((t.coefficient * t.law.sigma) ** 2 for t in normal))
    merged = Term(1.0, laws.Normal(mean, sigma, mean, mean))
    return [t for t in terms if not isinstance(t.law, laws.Normal)] + [merged]


def _with_student(heavy: list[Term], kept: list[Term], offset: float, paths: tuple[Path, ...], sigma: float) -> SumLaw:
    if len(heavy) > 1:
        raise NoExactLawError("the exact law of several Student t sources isn't computed; Monte Carlo is the method")
    term, others = heavy[0], [t for t in kept if t is not heavy[0]]
    assert isinstance(term.law, laws.StudentT)
    shift = offset + term.coefficient * term.law.m

    def make(variance: float) -> SumLaw:
        return sum_law([*others, Term(1.0, laws.Normal(0.0, math.sqrt(variance), 0.0, 0.0))], shift, paths)

    return ScaleMixture(term.law, term.coefficient, make, sigma)


def _hard(terms: list[Term], offset: float, paths: tuple[Path, ...], taken_apart: int) -> SumLaw:
    """Atoms first, then the widest source, are taken out of the sum; what is left is a sum again."""
    atoms = [_two_points(t) for t in terms if isinstance(t.law, laws.TwoPoint)]
    atoms += [(path.values, path.weights) for path in paths]
    rest = [t for t in terms if not isinstance(t.law, laws.TwoPoint)]
    if atoms:
        try:
            values, weights = merge_atoms(atoms)
        except TooManyAtomsError:
            raise NoExactLawError("the sum has too many different discrete values; Monte Carlo is the method") from None
        if not rest:
            return DiscreteLaw(values, weights, offset)
        return AtomMixture(values, weights, sum_law(rest, offset, (), taken_apart))
    widest = max(rest, key=lambda t: abs(t.coefficient) * t.law.sigma)
    others = list(rest)
    others.remove(widest)
    return ConditionedLaw(SingleLaw(widest, 0.0), sum_law(others, offset, (), taken_apart + 1))


def _two_points(term: Term) -> tuple[Array, Array]:
    law = term.law
    assert isinstance(law, laws.TwoPoint)
    values = term.coefficient * np.array([law.lower, law.upper])
    weights = np.array([1.0 - law.p_upper, law.p_upper])
    order = np.argsort(values)
    return values[order], weights[order]
