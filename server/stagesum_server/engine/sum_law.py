"""The law of a sum: what it answers, and its form as a Fourier series over its finite support.

With the sum centred on the middle of its support [-A, A], the period is T = 2A exactly, so nothing is sampled and
nothing wraps around: t_k = 2 pi k / T and

    F(y) = (y + A)/T + (2/T) Re sum_k M(i t_k) [(-1)^k - exp(-i t_k y)] / (i t_k)

For small probabilities the law is tilted by exp(theta y), which keeps their relative accuracy (z_k = theta + i t_k):

    P(Y > y) = exp(-theta y) / T  sum_k M(z_k) [exp(-i t_k y) - exp(-theta (A - y)) (-1)^k] / z_k
"""

from __future__ import annotations

import math
from abc import ABC, abstractmethod
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from stagesum_server.engine.characteristic import Complex, Term, Transform

    Array = NDArray[np.float64]

TOLERANCE = 1e-15  # of the truncated series: absolute without tilt, relative with it
FEWEST, MANY, MOST = 64, 1 << 13, 1 << 18  # frequencies: at least, more than is fast, at most
SMALL_PROBABILITY = 1e-3  # below it the tilted series is used
TILT_STEP = 0.5  # tilts are rounded to so many 1/sigma, so that their transforms can be kept
CHUNK = 1 << 20
SEARCH_STEPS = 100
SHORTEST_PLACES = 9  # shares below the shortest interval that are tried before the best is refined
BRACKET_RANGE = 1e-9  # probabilities nearer to 0 or 1 are searched over the whole support
BRACKETS = 256  # cells of the table that brackets quantiles


class SumLaw(ABC):
    """Law of a sum of independent terms; ``lower`` and ``upper`` are its support (or as good as that)."""

    lower: float
    upper: float
    mean: float
    sigma: float

    @abstractmethod
    def sf(self, x: Array) -> Array:
        """P(Y > x) with relative accuracy where it is small; ``x`` of shape (n,)."""

    @abstractmethod
    def cdf(self, x: Array) -> Array:
        """P(Y <= x) with relative accuracy where it is small; ``x`` of shape (n,)."""

    def outside(self, lower: float, upper: float) -> float:
        """P(Y < lower) + P(Y > upper); a value at a limit is inside."""
        below = self.cdf(np.array([np.nextafter(lower, -np.inf)]))[0] if np.isfinite(lower) else 0.0
        above = self.sf(np.array([upper]))[0] if np.isfinite(upper) else 0.0
        return float(below + above)

    def quantile(self, p: float) -> float:
        """Smallest x with P(Y <= x) >= p, for 0 < p < 1."""
        if p > 0.5:
            return self.upper_quantile(1.0 - p)
        return _solve(lambda x: float(self.cdf(np.array([x]))[0]), p, *self.bracket(p), rising=True)

    def upper_quantile(self, q: float) -> float:
        """The x that a share ``q`` of the values exceeds."""
        return _solve(lambda x: float(self.sf(np.array([x]))[0]), q, *self.bracket(1.0 - q), rising=False)

    def bracket(self, p: float) -> tuple[float, float]:
        """An interval that holds the quantile of ``p``."""
        return self.lower, self.upper

    def interval(self, coverage: float) -> tuple[float, float]:
        """Probabilistically symmetric coverage interval (JCGM 101:2008, 3.15)."""
        tail = 0.5 * (1.0 - coverage)
        return self.quantile(tail), self.upper_quantile(tail)

    def shortest(self, coverage: float) -> tuple[float, float] | None:
        """Shortest coverage interval (JCGM 101:2008, 3.16), or None where it would take too long to search."""
        return self.interval(coverage) if self.one_peak_in_the_middle else None

    @property
    def one_peak_in_the_middle(self) -> bool:
        """Whether the law is known to be its own mirror image with a single peak."""
        return False


def search_shortest(law: SumLaw, coverage: float) -> tuple[float, float]:
    """Shortest coverage interval by golden section over the share below it."""
    missing = 1.0 - coverage

    def ends(below: float) -> tuple[float, float]:
        low = law.lower if below <= 0.0 else law.quantile(below)
        high = law.upper if below >= missing else law.upper_quantile(missing - below)
        return low, high

    def width(below: float) -> float:
        low, high = ends(below)
        return high - low

    places = np.linspace(0.0, missing, SHORTEST_PLACES)
    best = int(np.argmin([width(float(place)) for place in places]))
    low, high = places[max(best - 1, 0)], places[min(best + 1, SHORTEST_PLACES - 1)]
    return ends(_golden(width, float(low), float(high)))


def _golden(f: Callable[[float], float], low: float, high: float) -> float:
    """Place of the smallest f in [low, high], to the square root of the rounding."""
    ratio = 0.5 * (math.sqrt(5.0) - 1.0)
    a, b = high - ratio * (high - low), low + ratio * (high - low)
    fa, fb = f(a), f(b)
    for _ in range(20):
        if fa <= fb:
            high, b, fb = b, a, fa
            a = high - ratio * (high - low)
            fa = f(a)
        else:
            low, a, fa = a, b, fb
            b = low + ratio * (high - low)
            fb = f(b)
    return 0.5 * (low + high)


def _solve(f: Callable[[float], float], target: float, low: float, high: float, *, rising: bool) -> float:
    """Where a monotone probability f passes ``target``, by the Illinois method on log f, safe at jumps."""
    goal, sign = math.log(target), 1.0 if rising else -1.0

    def distance(x: float) -> float:
        value = f(x)
        return sign * ((math.log(value) if value > 0.0 else -800.0) - goal)

    g_low, g_high, side, reach = distance(low), distance(high), 0, high - low
    if g_low >= 0.0 or g_high <= 0.0:
        return low if g_low >= 0.0 else high
    for step in range(SEARCH_STEPS):
        x = 0.5 * (low + high) if step % 4 == 3 else low - g_low * (high - low) / (g_high - g_low)
        if not low < x < high:
            break
        g = distance(x)
        if abs(g) < 1e-13 or high - low <= 1e-14 * reach:
            return x
        if g < 0.0:
            low, g_low = x, g
            g_high, side = (0.5 * g_high if side < 0 else g_high), -1
        else:
            high, g_high = x, g
            g_low, side = (0.5 * g_low if side > 0 else g_low), 1
    return high if rising else low


class SingleLaw(SumLaw):
    """One term: its law's own closed forms."""

    def __init__(self, term: Term, offset: float) -> None:
        c, law = term.coefficient, term.law
        self.c, self.law, self.offset = c, law, offset
        self.mean, self.sigma = offset + c * law.mean, abs(c) * law.sigma
        ends = (law.lower, law.upper) if law.bounded else (law.mean - 40.0 * law.sigma, law.mean + 40.0 * law.sigma)
        self.lower, self.upper = sorted(offset + c * end for end in ends)

    def _inner(self, x: Array) -> Array:
        return np.asarray((x - self.offset) / self.c)

    def sf(self, x: Array) -> Array:  # noqa: D102 - said by SumLaw, as below
        return self.law.sf(self._inner(x)) if self.c > 0.0 else self.law.cdf(np.nextafter(self._inner(x), -np.inf))

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return self.law.cdf(self._inner(x)) if self.c > 0.0 else self.law.sf(np.nextafter(self._inner(x), -np.inf))

    def density(self, x: Array) -> Array:
        """Probability density."""
        return self.law.density(self._inner(x)) / abs(self.c)

    def quantile(self, p: float) -> float:  # noqa: D102
        u = p if self.c > 0.0 else 1.0 - p
        return self.offset + self.c * float(self.law.quantile(np.array([u]))[0])

    def upper_quantile(self, q: float) -> float:  # noqa: D102
        if self.law.symmetric:
            return 2.0 * self.mean - self.quantile(q)
        return super().upper_quantile(q) if self.c > 0.0 else self.quantile(1.0 - q)

    def shortest(self, coverage: float) -> tuple[float, float] | None:  # noqa: D102
        return super().shortest(coverage) or search_shortest(self, coverage)

    @property
    def one_peak_in_the_middle(self) -> bool:  # noqa: D102
        return self.law.symmetric and self.law.shape not in ("arcsine", "two_point")

    @property
    def breaks(self) -> Array:
        """Places where the density jumps or bends, the ends of the support included."""
        inner = self.law.quantile(np.array([0.0, *self.law.kinks, 1.0])) if self.law.bounded else np.array([])
        return np.sort(self.offset + self.c * inner)


def frequencies_needed(transform: Transform) -> int:
    """How many frequencies the untilted series takes, 2 MOST where it is too slow.

    The sum of what is left out is at most envelope(t_K) / (pi m), m the power by which the envelope falls.
    """
    step = math.pi / transform.half_width
    K = FEWEST
    while K <= MOST:
        bound, power = transform.envelope(K * step)
        if bound < 1e-40 or (power > 0.0 and bound / (math.pi * power) < TOLERANCE):
            return K
        K *= 2
    return 2 * MOST


class SeriesLaw(SumLaw):
    """The law as a Fourier series; ``transform`` is that of the terms."""

    def __init__(self, transform: Transform, offset: float, mean: float, sigma: float, K: int) -> None:
        self.transform, self.A = transform, transform.half_width
        self.middle, self.mean, self.sigma = offset + transform.centre, mean, sigma
        self.lower, self.upper = self.middle - self.A, self.middle + self.A
        self.t = (math.pi / self.A) * np.arange(K + 1, dtype=np.float64)
        self.M, _ = transform(0.0, self.t)
        self._tilted: dict[int, tuple[Array, Complex, float]] = {}

    @cached_property
    def _table(self) -> tuple[Array, Array]:
        """Places and cdf that bracket quantiles; what rounding turned round is put straight."""
        x, F, _ = self.grid(BRACKETS)
        return np.append(x, self.upper), np.append(np.maximum.accumulate(F), 1.0)

    def bracket(self, p: float) -> tuple[float, float]:  # noqa: D102 - said by SumLaw, as below
        if not BRACKET_RANGE <= p <= 1.0 - BRACKET_RANGE:
            return self.lower, self.upper
        x, F = self._table
        right = int(np.searchsorted(F, p))
        return float(x[max(right - 2, 0)]), float(x[min(right + 1, BRACKETS)])

    def shortest(self, coverage: float) -> tuple[float, float] | None:  # noqa: D102
        found = super().shortest(coverage)
        return search_shortest(self, coverage) if found is None and self.t.size <= MANY else found

    @property
    def one_peak_in_the_middle(self) -> bool:  # noqa: D102
        if np.iscomplexobj(self.M):
            return False
        _, _, f = self.grid(BRACKETS)
        return bool(np.all(np.diff(f[: BRACKETS // 2 + 1]) >= -1e-9 * f.max()))

    def cdf(self, x: Array) -> Array:  # noqa: D102
        return self._probability(np.asarray(x, dtype=np.float64), -1.0)

    def sf(self, x: Array) -> Array:  # noqa: D102
        return self._probability(np.asarray(x, dtype=np.float64), 1.0)

    def _probability(self, x: Array, side: float) -> Array:
        y = np.clip(x - self.middle, -self.A, self.A)
        F = self._plain(y)
        result = np.clip(1.0 - F if side > 0.0 else F, 0.0, 1.0)
        for i in np.flatnonzero(result < SMALL_PROBABILITY):
            result[i] = self._tail(float(y[i]), side)
        return result

    def _plain(self, y: Array) -> Array:
        """F by the untilted series, absolute accuracy."""
        k, t = np.arange(1, self.t.size), self.t[1:]
        c = self.M[1:] / (1j * t)
        start = float(np.sum((np.where(k % 2, -1.0, 1.0) * c).real))
        out, step = np.empty_like(y), max(1, CHUNK // t.size)
        for first in range(0, y.size, step):
            part = slice(first, first + step)
            waves = np.sum((c * np.exp(-1j * np.outer(y[part], t))).real, axis=1)
            out[part] = 0.5 * (y[part] / self.A + 1.0) + (start - waves) / self.A
        return out

    def grid(self, points: int) -> tuple[Array, Array, Array]:
        """Places, cdf and density at ``points`` equal steps over the support, by one inverse transform each."""
        j = np.arange(points, dtype=np.float64)
        n = self.t.size - 1
        c = self.M[1:] / (1j * self.t[1:])
        folded = np.zeros(points, dtype=np.complex128)
        k = np.arange(1, n + 1)
        signs = np.where(k % 2, -1.0, 1.0)
        np.add.at(folded, k % points, c * signs) if n >= points else folded.__setitem__(k, c * signs)
        waves = np.fft.fft(folded).real
        F = j / points + (float(np.sum((signs * c).real)) - waves) / self.A
        spread = np.zeros(points, dtype=np.complex128)
        np.add.at(spread, k % points, self.M[1:] * signs)
        f = (0.5 + np.fft.fft(spread).real) / self.A
        return self.lower + (2.0 * self.A / points) * j, F, f

    def density(self, x: Array) -> Array:
        """Probability density by the untilted series, absolute accuracy."""
        y = np.asarray(x, dtype=np.float64) - self.middle
        waves = np.sum((self.M[1:] * np.exp(-1j * np.outer(y, self.t[1:]))).real, axis=1)
        return np.where(np.abs(y) <= self.A, (0.5 + waves) / self.A, 0.0)

    # -----------------------------------------------------------------------------------------

    def _tail(self, y: float, side: float) -> float:
        """P(Y > y) (side 1) or P(Y < y) (side -1), relative accuracy, by the tilted series."""
        if side * y >= self.A:
            return 0.0
        reach = side * (y + self.middle - self.mean)
        number = max(1, round(reach / (self.sigma * TILT_STEP)))
        theta = number * TILT_STEP / self.sigma
        t, R, log_scale = self._tilt(int(side * number), side * theta)
        u, A = side * y, self.A  # mirrored where the lower tail is asked for
        z = theta + 1j * t
        signs = np.where(np.arange(t.size) % 2, -1.0, 1.0)
        terms = R * (np.exp(-1j * t * u) - math.exp(-theta * (A - u)) * signs) / z
        total = float(terms[0].real + 2.0 * np.sum(terms[1:].real))
        return max(0.0, math.exp(log_scale - theta * u) * total / (2.0 * A))

    def _tilt(self, key: int, theta: float) -> tuple[Array, Complex, float]:
        """Frequencies, M(theta + i t)/M(theta) and log M(theta) for a tilt; a negative one is mirrored."""
        if key not in self._tilted:
            step, K = math.pi / self.A, FEWEST
            _, log_scale = self.transform(theta, np.zeros(1))
            # the envelope is relative to exp(A theta), the result to M(theta) times the width of the tilted law
            allowed = math.log(TOLERANCE / max(1.0, abs(theta) * self.sigma)) + log_scale - self.A * abs(theta)
            while K < MOST:
                bound, power = self.transform.envelope(K * step)
                if bound < 1e-300 or (power > 0.0 and math.log(bound) - math.log(power) < allowed):
                    break
                K *= 2
            t = step * np.arange(K + 1, dtype=np.float64)
            R, _ = self.transform(theta, t)
            self._tilted[key] = t, np.asarray(R if theta > 0.0 else np.conj(R), dtype=np.complex128), log_scale
        return self._tilted[key]
