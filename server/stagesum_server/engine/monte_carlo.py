"""Monte Carlo of the exact chain (JCGM 101:2008): all points on the same draws, memory independent of the trials."""

from __future__ import annotations

import math
import threading
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from stagesum_server.engine.sampling import BLOCK, Sampler

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from numpy.typing import NDArray

    from stagesum_server.engine.chain import Limit

    Array = NDArray[np.float64]
    Counts = NDArray[np.int64]

DEFAULT_TRIALS = 200_000
CONFIDENCE = 0.95  # of the intervals about yields
BINS_IN_ALL = 1 << 21  # bins over all points: bounds the memory of many points
MOST_BINS, FEWEST_BINS = 16_384, 256
SHOWN_BINS = 80  # of the histogram in the answer, at most
SIGNIFICANT_DIGITS = 2  # of the standard uncertainty, for the numerical tolerance


@dataclass(frozen=True)
class Grid:
    """Where errors are counted: ``bins`` equal bins between ``lower`` and ``upper`` at each point; both (points,)."""

    lower: Array
    upper: Array
    bins: int

    @staticmethod
    def between(lower: Array, upper: Array) -> Grid:
        """A grid as fine as the memory for this many points allows; a range without width is opened a little."""
        bins = max(FEWEST_BINS, min(MOST_BINS, BINS_IN_ALL // lower.size))
        width = np.maximum(upper - lower, 1e-300 + 1e-12 * np.maximum(abs(lower), abs(upper)))
        return Grid(lower, lower + width, bins)

    def places(self, e: Array, p: int) -> NDArray[np.int32]:
        """Bins of errors at point ``p``; what lies outside the grid is counted in the last ones."""
        shifted = e - self.lower[p]
        shifted *= self.bins / (self.upper[p] - self.lower[p])
        np.clip(shifted, 0, self.bins - 1, out=shifted)
        return np.asarray(shifted.astype(np.int32))


class Tally:
    """Sums and counts of errors at all points; partial tallies are added in the order of their blocks."""

    def __init__(self, grid: Grid, centre: Array, limit: Limit | None) -> None:
        self.grid, self.centre, self.limit = grid, centre, limit
        self.trials = 0
        self.sums = np.zeros((2, centre.size))
        self.counts: Counts = np.zeros((centre.size, grid.bins), dtype=np.int64)
        self.inside: Counts = np.zeros(centre.size, dtype=np.int64)
        self.inside_all = 0
        self.smallest, self.largest = np.full(centre.size, np.inf), np.full(centre.size, -np.inf)

    def add(self, e: Array) -> None:
        """Count errors, shape (points, trials)."""
        self.trials += e.shape[1]
        passed = None
        for p, row in enumerate(e):
            shifted = row - self.centre[p]
            self.sums[0, p] += shifted.sum()
            self.sums[1, p] += np.square(shifted, out=shifted).sum()
            self.counts[p] += np.bincount(self.grid.places(row, p), minlength=self.grid.bins)
            if self.limit is not None:
                inside = (row >= self.limit.lower[p]) & (row <= self.limit.upper[p])
                self.inside[p] += np.count_nonzero(inside)
                passed = inside if passed is None else passed & inside
        np.minimum(self.smallest, e.min(axis=1), out=self.smallest)
        np.maximum(self.largest, e.max(axis=1), out=self.largest)
        if passed is not None:
            self.inside_all += int(np.count_nonzero(passed))

    def absorb_counts(self, other: Tally) -> None:
        """Add what is exact in any order: counts and extremes."""
        self.trials += other.trials
        self.counts += other.counts
        self.inside += other.inside
        self.inside_all += other.inside_all
        np.minimum(self.smallest, other.smallest, out=self.smallest)
        np.maximum(self.largest, other.largest, out=self.largest)

    @property
    def mean(self) -> Array:
        """Mean error at each point."""
        return np.asarray(self.centre + self.sums[0] / self.trials)

    @property
    def sigma(self) -> Array:
        """Standard deviation at each point (divisor: trials - 1)."""
        spread = self.sums[1] - self.sums[0] ** 2 / self.trials
        return np.asarray(np.sqrt(np.maximum(spread, 0.0) / max(self.trials - 1, 1)))

    def edges(self, p: int) -> Array:
        """Bin edges at one point."""
        return np.linspace(self.grid.lower[p], self.grid.upper[p], self.grid.bins + 1)

    def cumulated(self, p: int) -> Array:
        """Share of trials below each bin edge at one point."""
        return np.concatenate([[0.0], np.cumsum(self.counts[p]) / self.trials])

    def interval(self, p: int, coverage: float) -> tuple[float, float]:
        """Probabilistically symmetric coverage interval (JCGM 101:2008, 7.7), linear inside a bin."""
        tail = 0.5 * (1.0 - coverage)
        F, x = self.cumulated(p), self.edges(p)
        return self._within(p, _quantile(F, x, tail)), self._within(p, _quantile(F, x, 1.0 - tail))

    def shortest(self, p: int, coverage: float) -> tuple[float, float]:
        """Shortest coverage interval (JCGM 101:2008, 5.3.4): among those that begin or end at a bin edge."""
        F, x = self.cumulated(p), self.edges(p)
        starts = x[1.0 - coverage >= F]
        ends = np.interp(F[1.0 - coverage >= F] + coverage, F, x)
        best = int(np.argmin(ends - starts))
        return self._within(p, float(starts[best])), self._within(p, float(ends[best]))

    def _within(self, p: int, x: float) -> float:
        """No quantile lies beyond what was drawn."""
        return float(min(max(x, self.smallest[p]), self.largest[p]))

    def histogram(self, p: int) -> tuple[Array, Counts]:
        """Edges and counts of a coarse histogram over the occupied range at one point."""
        occupied = np.flatnonzero(self.counts[p])
        first, last = int(occupied[0]), int(occupied[-1]) + 1
        group = math.ceil((last - first) / SHOWN_BINS)
        last = min(first + group * math.ceil((last - first) / group), self.grid.bins)
        starts = np.arange(first, last, group)
        return self.edges(p)[np.append(starts, last)], np.add.reduceat(self.counts[p][:last], starts)


def _quantile(F: Array, x: Array, p: float) -> float:
    """Smallest place where the piecewise linear F reaches p."""
    right = max(1, int(np.searchsorted(F, p, side="left")))
    share = (p - F[right - 1]) / (F[right] - F[right - 1])
    return float(x[right - 1] + share * (x[right] - x[right - 1]))


def run(sampler: Sampler, tally: Tally, first_block: int, trials: int, threads: int) -> None:
    """Add ``trials`` trials, beginning with block ``first_block``, to ``tally``.

    Counts are added as they come, floating sums in the order of the blocks, so that the result is the same for any
    number of threads.
    """
    lock = threading.Lock()
    waiting: dict[int, Array] = {}
    expected = 0

    def work(blocks: Iterator[int]) -> None:
        nonlocal expected
        mine = Tally(tally.grid, tally.centre, tally.limit)
        for block in blocks:
            mine.sums = np.zeros_like(tally.sums)
            for e in sampler.errors(first_block + block, min(BLOCK, trials - block * BLOCK)):
                mine.add(e)
            with lock:
                waiting[block] = mine.sums
                while expected in waiting:
                    tally.sums += waiting.pop(expected)
                    expected += 1
        with lock:
            tally.absorb_counts(mine)

    _share_out(work, math.ceil(trials / BLOCK), threads)


def _share_out(work: Callable[[Iterator[int]], None], blocks: int, threads: int) -> None:
    """Let each thread take the next block until none is left."""
    numbers = iter(range(blocks))  # a range's iterator is safe to share between threads
    if threads == 1 or blocks == 1:
        work(numbers)
        return
    with ThreadPoolExecutor(min(threads, blocks)) as pool:
        for future in [pool.submit(work, numbers) for _ in range(min(threads, blocks))]:
            future.result()


def refined_intervals(sampler: Sampler, tally: Tally, coverage: float, threads: int) -> Array:
    """Ends of the symmetric intervals as order statistics of all trials, shape (points, 2).

    A second pass draws the same trials again and keeps only those in the histogram bins that hold the ends.
    """
    points = range(tally.centre.size)
    tail = 0.5 * (1.0 - coverage)
    ranks = [max(0, math.ceil(p * tally.trials - 1e-9) - 1) for p in (tail, 1.0 - tail)]
    below = [np.concatenate([[0], np.cumsum(tally.counts[p])]) for p in points]
    bins = np.array([[int(np.searchsorted(below[p], rank, side="right")) - 1 for rank in ranks] for p in points])
    kept: list[list[list[Array]]] = [[[], []] for _ in points]
    lock = threading.Lock()

    def work(blocks: Iterator[int]) -> None:
        for block in blocks:
            for e in sampler.errors(block, min(BLOCK, tally.trials - block * BLOCK)):
                for p in points:
                    where = tally.grid.places(e[p], p)
                    for end in (0, 1):
                        found = e[p][where == bins[p, end]]
                        if found.size:
                            with lock:
                                kept[p][end].append(found)

    _share_out(work, math.ceil(tally.trials / BLOCK), threads)
    return np.array(
        [[np.sort(np.concatenate(kept[p][end]))[ranks[end] - below[p][bins[p, end]]] for end in (0, 1)] for p in points]
    )


def numerical_tolerance(u: float, digits: int = SIGNIFICANT_DIGITS) -> float:
    """Numerical tolerance of a standard uncertainty (JCGM 101:2008, 7.9.2): u = c 10^l, tolerance = 10^l / 2."""
    if u <= 0.0:
        return 0.0
    exponent = int(f"{u:.{digits - 1}e}".partition("e")[2]) - (digits - 1)
    return 0.5 * float(f"1e{exponent}")


def run_adaptively(
    sampler: Sampler, tally: Tally, coverage: float, most_trials: int, threads: int
) -> tuple[bool, float]:
    """Add rounds of trials until the results are stable (JCGM 101:2008, 7.9.4); tells whether, and the tolerance.

    A round has at least 100 / (1 - coverage) and 10^4 trials, in whole blocks. It is stable when twice the
    standard deviation of the mean over the rounds is within the numerical tolerance for the means, standard
    deviations and both interval ends at every point. The tolerance returned is that of the largest sigma.
    """
    per_round = BLOCK * math.ceil(max(100.0 / (1.0 - coverage), 1e4) / BLOCK)
    results: list[Array] = []
    tolerance = np.zeros(tally.centre.size)
    while tally.trials + per_round <= max(most_trials, 2 * per_round):
        part = Tally(tally.grid, tally.centre, tally.limit)
        run(sampler, part, tally.trials // BLOCK, per_round, threads)
        tally.sums += part.sums
        tally.absorb_counts(part)
        ends = np.array([part.interval(p, coverage) for p in range(tally.centre.size)])
        results.append(np.stack([part.mean, part.sigma, ends[:, 0], ends[:, 1]]))
        tolerance = np.array([numerical_tolerance(float(u)) for u in tally.sigma])
        if len(results) > 1:
            spread = np.std(np.stack(results), axis=0, ddof=1) / math.sqrt(len(results))
            if np.all(2.0 * spread <= tolerance):
                return True, float(tolerance.max())
    return False, float(tolerance.max())


def clopper_pearson(passed: int, trials: int) -> tuple[float, float]:
    """Two-sided 95 % confidence interval of a share (Clopper and Pearson, 1934)."""
    tail = 0.5 * (1.0 - CONFIDENCE)
    lower = 0.0 if passed == 0 else float(special.betaincinv(passed, trials - passed + 1, tail))
    upper = 1.0 if passed == trials else float(special.betaincinv(passed + 1, trials - passed, 1.0 - tail))
    return lower, upper
