"""Does the chain meet its limit: a verdict for each method, and whether the simple method holds."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

import numpy as np
from scipy import special
from stagesum_schemas.records import Checks, Verdict

from stagesum_server.engine.monte_carlo import numerical_tolerance

if TYPE_CHECKING:
    from numpy.typing import NDArray
    from stagesum_schemas.records import Interval

    from stagesum_server.engine.chain import Limit, Model
    from stagesum_server.engine.rss import Propagation
    from stagesum_server.engine.worst_case import Extremes

    Array = NDArray[np.float64]

NOISE_ERRORS = 4.0  # standard errors by which the worst of many interval ends may be off
PASS, FAIL, UNDECIDED = "pass", "fail", "undecided"


def of_worst_case(extremes: Extremes, limit: Limit) -> str:
    """Pass if the exact worst case is inside the limit at every point."""
    inside = (extremes.lower >= limit.lower) & (extremes.upper <= limit.upper)
    return PASS if inside.all() else FAIL


def of_rss(share_outside: Array, limit: Limit) -> str:
    """Pass if the normal (or t) law's yield reaches the target at every point."""
    return PASS if np.all(share_outside <= _permitted(limit)) else FAIL


def of_monte_carlo(interval: tuple[float, float], limit: Limit) -> str:
    """Pass if the joint yield's confidence interval lies above the target, fail if below, else undecided."""
    if interval[0] >= limit.target:
        return PASS
    return FAIL if interval[1] < limit.target else UNDECIDED


def of_convolution(share_outside: Array, limit: Limit) -> str:
    """Pass if the shares outside at all points add up to no more than is permitted (a unit must pass everywhere).

    Where each point alone keeps within it but their sum does not, the joint yield is open: undecided.
    """
    if share_outside.sum() <= _permitted(limit):
        return PASS
    return UNDECIDED if np.all(share_outside <= _permitted(limit)) else FAIL


def _permitted(limit: Limit) -> float:
    """Share that may lie outside; the rounding of 1 - target is allowed for."""
    return (1.0 - limit.target) * (1.0 + 1e-12)


def overall(said: dict[str, str], limit: Limit) -> Verdict:
    """Put the methods' verdicts together: those in ``limit.by`` decide."""
    by = tuple(method for method in limit.by if method in said)  # a method may not be had for a chain
    deciding = [said[method] for method in by]
    together = PASS if all(v == PASS for v in deciding) else FAIL if FAIL in deciding else UNDECIDED
    return Verdict(overall=together, by=by, yield_=limit.target, **said)


def governing_point(limit: Limit | None, rss: Propagation, extremes: Extremes) -> int:
    """The point with the largest error relative to its limit by rss; without a limit, the largest worst case."""
    if limit is None:
        return int(np.argmax(np.maximum(-extremes.lower, extremes.upper)))
    centre, half = 0.5 * (limit.lower + limit.upper), 0.5 * (limit.upper - limit.lower)
    farthest = np.maximum(rss.upper - centre, centre - rss.lower)
    with np.errstate(divide="ignore", invalid="ignore"):
        return int(np.argmax(np.nan_to_num(farthest / half, nan=0.0, posinf=np.inf)))


def check_rss(model: Model, rss: Propagation, method: str, against: list[Interval], trials: int | None) -> Checks:
    """Compare rss with another method (JCGM 101:2008, 8.2): both interval ends within the numerical tolerance.

    With ``trials``, the other interval's ends carry noise of their own, sqrt(p (1 - p) / trials) / density, taken at
    a normal law's quantile; where it hides the answer, ``rss_holds`` is left open.
    """
    differences = [
        max(abs(rss.lower[p] - interval.lower), abs(rss.upper[p] - interval.upper))
        for p, interval in enumerate(against)
    ]
    tolerances = [numerical_tolerance(float(u)) for u in rss.sigma]
    excess = [
        d / t if t > 0.0 else (math.inf if d > 0.0 else 0.0) for d, t in zip(differences, tolerances, strict=True)
    ]
    p = int(np.argmax(excess))
    noise = NOISE_ERRORS * _quantile_noise(float(rss.sigma[p]), model.coverage, trials) if trials else 0.0
    holds, detail = _holds(method, differences[p], tolerances[p], noise)
    return Checks(method, tolerances[p], float(differences[p]), p, detail, holds)


def _quantile_noise(sigma: float, coverage: float, trials: int) -> float:
    """Standard error of a Monte Carlo interval end, for a normal law."""
    tail = 0.5 * (1.0 - coverage)
    z = float(special.ndtri(tail))
    return sigma * math.sqrt(tail * (1.0 - tail) / trials) * math.sqrt(2.0 * math.pi) * math.exp(0.5 * z * z)


def _holds(method: str, difference: float, tolerance: float, noise: float) -> tuple[bool | None, str]:
    if difference + noise <= tolerance:
        return True, f"rss and {method} agree within the numerical tolerance (JCGM 101:2008, 8.2)"
    if difference - noise > tolerance:
        return False, f"rss differs from {method} by more than the numerical tolerance (JCGM 101:2008, 8.2)"
    return None, "too few trials to tell: the noise of the Monte Carlo interval is not small against the tolerance"
