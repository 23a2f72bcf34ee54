"""Joint yield at ppm level: importance sampling of the exact chain, with the exact linear law as control.

A unit fails if its error leaves the limit at any point: the union of two rare events a point. Units are drawn from a
mixture of laws, each tilted towards one of these events, and of the untilted law (so that no weight exceeds
1 / UNTILTED). A unit's weight is the untilted density over the mixture's, 1 / sum_k a_k exp(theta_k y_k - kappa_k),
with y_k the part of the linear error that is tilted. That is unbiased whatever the chain: calibration, correlation
and reading sources only cost efficiency. (Owen, Maximov, Chertkov 2019, from memory: importance sampling of a union
of rare events; Owen, Zhou 2000, from memory: mixtures with control variates.)

Control: the number of points at which the *linear* error is outside has a mean that convolution gives exactly.
"""

from __future__ import annotations

import math
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from stagesum_server.engine.characteristic import Term, Transform
from stagesum_server.engine.convolution import flatten
from stagesum_server.engine.sampling import Sampler
from stagesum_server.engine.tilting import tilted

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from stagesum_server.engine.chain import Limit, Model
    from stagesum_server.engine.correlation import Cluster
    from stagesum_server.engine.rss import Propagation
    from stagesum_server.engine.sampling import Drawn
    from stagesum_server.engine.tilting import Draws

    Array = NDArray[np.float64]

TRIALS = 32_768
UNTILTED = 0.1  # share of the mixture that is not tilted
RARE = 0.02  # shares outside above this are counted plainly
MOST_EVENTS = 24  # events that get a tilt of their own; the likeliest ones
FARTHEST = 40.0  # sigmas from the mean beyond which an event is left alone
STEEPEST = 100.0  # tilts are at most so many 1/sigma
BISECTIONS = 9  # of the tilt, to one per cent: a near miss costs next to nothing
FEWEST_FAILURES = 50  # fewer failing trials than this don't carry a confidence interval
SUB_BLOCK = 4096
NORMAL_95 = 1.959963984540054
STREAM = 1 << 20  # stream numbers above those of plain blocks


@dataclass(frozen=True)
class JointFailure:
    """Share of units outside the limit anywhere, its standard error, and how many plain trials would match it."""

    share: float
    error: float
    effective_trials: float

    @property
    def interval(self) -> tuple[float, float]:
        """95 % confidence interval of the share."""
        return max(0.0, self.share - NORMAL_95 * self.error), min(1.0, self.share + NORMAL_95 * self.error)


@dataclass(frozen=True)
class _Event:
    """One side of the limit at one point: the tilt theta of its linear error, and what the tilt does to each variable."""

    point: int
    theta: float
    kappa: float
    draws: dict[int, Draws]


def estimate(
    model: Model,
    limit: Limit,
    S: Array,
    clusters: tuple[Cluster, ...],
    rss: Propagation,
    exact: Array | None,
    threads: int = 1,
) -> JointFailure | None:
    """Estimate the share outside; None where it isn't rare and plain counting does as well.

    ``exact`` (points,) has the linear law's share outside at each point, where it is known.
    """
    guess = _normal_guess(limit, rss)
    if (exact.max() if exact is not None else guess.max()) > RARE:
        return None
    with np.errstate(over="ignore", divide="ignore", invalid="ignore"):
        events = _events(model, limit, S, clusters, rss, guess)
    if not events:
        return None
    mixture = _Mixture(model, S, clusters, events)
    pilot = _run(mixture, limit, TRIALS // 8, 0, threads)
    beta = _regression(pilot) if exact is not None else 0.0
    outcomes = _run(mixture, limit, TRIALS, 1, threads)
    if sum(int(np.count_nonzero(f)) for f, _ in outcomes) < FEWEST_FAILURES:
        return None
    found = _combine(outcomes, beta, float(exact.sum()) if exact is not None else 0.0)
    return found if math.isfinite(found.share + found.error + found.effective_trials) else None


def _normal_guess(limit: Limit, rss: Propagation) -> Array:
    """Tail shares (points, 2) by Chernoff's bound of a normal law; only their ratios steer the mixture."""
    with np.errstate(divide="ignore", invalid="ignore"):
        z = np.stack([rss.mean - limit.lower, limit.upper - rss.mean], axis=1) / rss.sigma[:, None]
    return np.exp(-0.5 * np.clip(np.nan_to_num(z, nan=40.0, posinf=40.0), 0.0, 40.0) ** 2)


def _events(
    model: Model, limit: Limit, S: Array, clusters: tuple[Cluster, ...], rss: Propagation, guess: Array
) -> list[_Event]:
    """The likeliest events with their tilts."""
    clustered = {member for cluster in clusters for member in cluster.members}
    order = np.argsort(-guess, axis=None, kind="stable")[:MOST_EVENTS]
    events = []
    for p, side in zip(*np.unravel_index(order, guess.shape), strict=True):
        sign = 1.0 if side else -1.0
        distance = sign * ((limit.upper if side else limit.lower)[p] - rss.mean[p])
        if 0.0 < distance < FARTHEST * rss.sigma[p]:
            events.append(_event(model, S[p], int(p), sign, float(distance), float(rss.sigma[p]), clustered))
    return events


def _event(model: Model, s: Array, p: int, sign: float, distance: float, sigma: float, clustered: set[int]) -> _Event:
    """Tilt towards one side at point ``p``, so that the tilted mean lies at the limit, ``distance`` from the mean."""
    tiltable = [
        j
        for j, v in enumerate(model.variables)
        if j not in clustered and s[j] != 0.0 and tilted(v.law, 0.0) is not None
    ]
    terms = [part for j in tiltable for part in flatten(Term(float(s[j]), model.variables[j].law))]
    transform = Transform(terms)
    mean = math.fsum(term.coefficient * term.law.mean for term in terms)

    def log_mgf(theta: float) -> float:
        return transform(theta, np.zeros(1))[1] + theta * transform.centre

    theta = sign * _steepness(lambda size: log_mgf(sign * size) - sign * size * mean, distance, sigma)
    draws = {j: tilted(model.variables[j].law, theta * float(s[j])) for j in tiltable}
    return _Event(p, theta, log_mgf(theta), {j: law for j, law in draws.items() if law is not None})


def _steepness(cumulant: Callable[[float], float], distance: float, sigma: float) -> float:
    """The tilt at which the mean has moved by ``distance``: cumulant'(theta) = distance, by bisection on log theta.

    Where the limit is out of reach, the steepest tilt.
    """
    low, high = 0.1 / sigma, STEEPEST / sigma
    for _ in range(BISECTIONS):
        theta = math.sqrt(low * high)
        step = 1e-3 * theta
        moved = (cumulant(theta + step) - cumulant(theta - step)) / (2.0 * step)
        low, high = (theta, high) if moved < distance else (low, theta)
    return math.sqrt(low * high)


class _Mixture:
    """Draws from the mixture, and the weights of what was drawn."""

    def __init__(self, model: Model, S: Array, clusters: tuple[Cluster, ...], events: list[_Event]) -> None:
        self.model, self.S, self.events = model, S, events
        self.sampler = Sampler(model, clusters, model.monte_carlo.seed, all_given=True)
        self.tilted_share = (1.0 - UNTILTED) / max(len(events), 1)

    def components(self, trials: int) -> list[tuple[_Event | None, int]]:
        """Each component with its number of trials: fixed shares, which is better than drawn ones."""
        each = round(trials * self.tilted_share) if self.events else 0
        return [(None, trials - each * len(self.events)), *((event, each) for event in self.events)]

    def draw(self, event: _Event | None, rng: np.random.Generator, size: int) -> Drawn:
        """Values of all variables, those of the event's point tilted."""
        drawn = self.sampler.draw_clusters(rng, size)
        clustered = {j for j, _ in drawn}
        for j, variable in enumerate(self.model.variables):
            if j in clustered:
                continue
            sites = range(len(self.model.points)) if variable.per_point else (-1,)
            for site in sites:
                law: Draws = variable.law
                if event is not None and j in event.draws and site in (-1, event.point):
                    law = event.draws[j]
                x = np.empty(size)
                law.draw(rng, x)
                drawn[j, site] = x
        return drawn

    def weights(self, drawn: Drawn, size: int, trials: int) -> Array:
        """Untilted density over the mixture's."""
        shares = self.components(trials)
        below = np.full(size, shares[0][1] / trials)
        for event, count in shares[1:]:
            assert event is not None
            exponent = np.full(size, -event.kappa)
            for j in event.draws:
                site = event.point if self.model.variables[j].per_point else -1
                exponent += (event.theta * float(self.S[event.point, j])) * drawn[j, site]
            below += count / trials * np.exp(exponent)
        return 1.0 / below

    def linear(self, drawn: Drawn, size: int) -> Array:
        """Linear errors, shape (points, size)."""
        e = np.zeros((len(self.model.points), size))
        for j, variable in enumerate(self.model.variables):
            for p in np.flatnonzero(self.S[:, j]):
                e[p] += float(self.S[p, j]) * drawn[j, int(p) if variable.per_point else -1]
        return e


def _run(mixture: _Mixture, limit: Limit, trials: int, stream: int, threads: int) -> list[tuple[Array, Array]]:
    """Weighted failures and counts of every component's trials; each component has a stream of its own."""

    def component(k: int, event: _Event | None, count: int) -> tuple[Array, Array]:
        seed = np.random.SeedSequence(mixture.model.monte_carlo.seed, spawn_key=(STREAM + stream, k))
        rng = np.random.Generator(np.random.SFC64(seed))
        sizes = [min(SUB_BLOCK, count - start) for start in range(0, count, SUB_BLOCK)]
        with np.errstate(over="ignore", divide="ignore", invalid="ignore"):  # a weight of 1 / inf is a true 0
            parts = [_outcome(mixture, event, limit, rng, size, trials) for size in sizes]
        return np.concatenate([f for f, _ in parts]), np.concatenate([c for _, c in parts])

    tasks = [(k, event, count) for k, (event, count) in enumerate(mixture.components(trials)) if count]
    if threads == 1:
        return [component(*task) for task in tasks]
    with ThreadPoolExecutor(threads) as pool:
        return list(pool.map(lambda task: component(*task), tasks))


def _combine(outcomes: list[tuple[Array, Array]], beta: float, known: float) -> JointFailure:
    """Failures with the control taken out and its known mean put back; the components are strata."""
    trials = sum(f.size for f, _ in outcomes)
    parts = [f - beta * c for f, c in outcomes]
    share = beta * known + math.fsum(float(part.sum()) for part in parts) / trials
    variance = math.fsum(part.size * float(part.var(ddof=1)) for part in parts if part.size > 1) / trials**2
    share = min(max(share, 0.0), 1.0)
    # a control that agrees in every failing trial seen doesn't prove that it agrees in all
    failures = sum(int(np.count_nonzero(f)) for f, _ in outcomes)
    error = max(math.sqrt(variance), share / failures)
    # the square of a share below 1e-154 would underflow
    effective = share / error * ((1.0 - share) / error) if error > 0.0 else math.inf
    return JointFailure(share, error, effective)


def _outcome(
    mixture: _Mixture, event: _Event | None, limit: Limit, rng: np.random.Generator, size: int, trials: int
) -> tuple[Array, Array]:
    """Weighted failures of the exact chain, and weighted numbers of points where the linear error is outside."""
    drawn = mixture.draw(event, rng, size)
    w = mixture.weights(drawn, size, trials)
    lower, upper = limit.lower[:, None], limit.upper[:, None]
    e = mixture.sampler.propagate(drawn, rng, size)
    fails = np.any((e < lower) | (e > upper), axis=0)
    y = mixture.linear(drawn, size)
    count = np.sum((y < lower) | (y > upper), axis=0)
    return w * fails, w * count


def _regression(outcomes: list[tuple[Array, Array]]) -> float:
    """Coefficient that makes failures minus beta times counts vary least, within the components."""
    cross = sum(float(np.sum((f - f.mean()) * (c - c.mean()))) for f, c in outcomes)
    square = sum(float(np.sum((c - c.mean()) ** 2)) for _, c in outcomes)
    return cross / square if square > 0.0 else 0.0
