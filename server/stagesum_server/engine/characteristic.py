"""Moment generating functions of sums of laws, scaled so that they never overflow.

For every term, centred on the middle of its support of half-width a, ``M(z) = E exp(z X)`` is returned times
``exp(-a abs(Re z))``. At Re z = 0 it is the characteristic function. Terms of one family are worked on together.

=========== ==========================================================
symbol      meaning
=========== ==========================================================
theta       Re z, the tilt
t           Im z, frequencies, shape (K,)
a           half-width of a term's support
klo, khi    cuts of a normal law in its parent's sigmas
=========== ==========================================================

Laws without a straight form are sums of others: a mean of n readings is n terms of 1/n, a symmetric trapezoid two
uniform laws, a symmetric triangle two equal ones.
"""

from __future__ import annotations

import math
from collections import Counter
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy import special

from stagesum_server.engine import laws

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator

    from numpy.typing import NDArray

    Array = NDArray[np.float64]
    Complex = NDArray[np.complex128]
    Kernel = Callable[[Array, float, Array], Array | Complex]

SMALL = 4.0  # below this abs(z a) integrals are done by quadrature, where closed forms cancel
_NODES, _WEIGHTS = np.polynomial.legendre.leggauss(40)
CHUNK = 1 << 22  # elements of a temporary array of pieces times frequencies
UNBOUNDED_SIGMAS = 20.0  # a normal law's support in the series, also when it is tilted by ten sigma
W_EXCESS = 1.3  # abs(w(x + i y)) <= 1.3 / (sqrt(pi) abs(x + i y)) for y >= 0


@dataclass(frozen=True)
class Term:
    """One independent part of a sum: ``coefficient`` times a law's value."""

    coefficient: float
    law: laws.Law


class Path:
    """A law known by its values at weighted nodes (several sources that follow one cause)."""

    def __init__(self, values: Array, weights: Array) -> None:
        self.values, self.weights = values, weights / weights.sum()
        self.lower, self.upper = float(values.min()), float(values.max())
        self.mean = float(np.sum(self.weights * values))
        self.sigma = math.sqrt(float(np.sum(self.weights * (values - self.mean) ** 2)))


class Transform:
    """The product of all terms' transforms; ``half_width`` is that of the sum's support, ``centre`` its middle."""

    def __init__(self, terms: list[Term], paths: tuple[Path, ...] = ()) -> None:
        self.centre, self.half_width, self.normal_variance = 0.0, 0.0, 0.0
        self._uniform: list[float] = []
        self._arcsine: list[float] = []
        self._cut: list[Cut] = []
        self._leaning: list[tuple[float, float]] = []
        self._atoms: list[tuple[Array, Array]] = []
        self._pieces: list[Array] = []
        for term in terms:
            self._add(term.coefficient, term.law)
        for path in paths:
            self._add_atoms(path.values, path.weights)
        if self.normal_variance:
            self.half_width += UNBOUNDED_SIGMAS * math.sqrt(self.normal_variance)

    def _add(self, c: float, law: laws.Law) -> None:
        """Take in one term."""
        if isinstance(law, laws.Normal):
            self.centre += c * law.m
            self.normal_variance += (c * law.s) ** 2
            return
        half = 0.5 * abs(c) * (law.upper - law.lower)
        self.centre += 0.5 * c * (law.lower + law.upper)
        self.half_width += half
        self._add_bounded(c, law, half)

    def _add_bounded(self, c: float, law: laws.Law, half: float) -> None:
        if isinstance(law, laws.Triangular) and law.symmetric:
            self._uniform += [0.5 * half] * 2
        elif isinstance(law, laws.Triangular):
            lean = 2.0 * law.peak - 1.0
            self._leaning.append((half, lean if c > 0.0 else -lean))
        elif isinstance(law, laws.Trapezoidal):
            shares = (0.5 * (1.0 + law.top_ratio), 0.5 * (1.0 - law.top_ratio))
            self._uniform += [share * half for share in shares if share > 0.0]
        elif isinstance(law, laws.Uniform):
            self._uniform.append(half)
        elif isinstance(law, laws.Arcsine):
            self._arcsine.append(half)
        elif isinstance(law, laws.TruncatedNormal):
            cuts = law.cuts if c > 0.0 else (-law.cuts[1], -law.cuts[0])
            self._cut.append((half, abs(c) * law.s, *cuts, law.content))
        elif isinstance(law, laws.TwoPoint):
            p = law.p_upper if c > 0.0 else 1.0 - law.p_upper
            self._atoms.append((np.array([-half, half]), np.array([1.0 - p, p])))
        elif isinstance(law, laws.Samples):
            values = np.sort(c * (law.values - 0.5 * (law.lower + law.upper)))
            self._pieces.append(values)
        else:
            raise TypeError(f"no transform is known for the shape {law.shape}")

    def _add_atoms(self, values: Array, weights: Array) -> None:
        middle, half = 0.5 * (values.min() + values.max()), 0.5 * (values.max() - values.min())
        self.centre += float(middle)
        self.half_width += float(half)
        self._atoms.append((values - middle, weights))

    # -----------------------------------------------------------------------------------------

    def __call__(self, theta: float, t: Array) -> tuple[Array | Complex, float]:
        """Return M(theta + i t) / M(theta), shape (K,), and log M(theta); ``t[0]`` must be 0.

        Without tilt and with symmetric terms only, the ratio is real.
        """
        z: Complex = theta + 1j * t.astype(np.complex128)
        v = self.normal_variance
        M = np.exp(-0.5 * v * t * t) * (np.exp(1j * v * theta * t) if theta and v else 1.0)
        log_scale = 0.5 * v * theta * theta
        for factor, log_part in self._factors(theta, t, z):
            log_scale += log_part + math.log(abs(factor[0]))
            M = M * (factor / factor[0])
        return M, log_scale

    def _factors(self, theta: float, t: Array, z: Complex) -> Iterator[tuple[Array | Complex, float]]:
        """Yield each family's scaled transform and the exponent that it was scaled by."""
        tilt = abs(theta)
        if self._uniform:
            yield _product(_uniform, self._uniform, theta, t), tilt * math.fsum(self._uniform)
        if self._arcsine:
            yield _product(_arcsine, self._arcsine, theta, t), tilt * math.fsum(self._arcsine)
        if self._cut:
            yield _cut_normals(self._cut, theta, t)
        for half, lean in self._leaning:
            yield _leaning(half * z, lean, half * tilt), half * tilt
        for values, weights in self._atoms:
            reach = float(np.abs(values).max()) * tilt
            yield _atoms(values, weights, z, reach), reach
        for values in self._pieces:
            yield _pieces(values, z, tilt), float(values[-1]) * tilt

    def envelope(self, t: float) -> tuple[float, float]:
        """Bound of abs(M(theta + i t')) exp(-A abs(theta)) for all t' >= t, and the power by which it falls on.

        The bound times (t / t')^power holds for t' > t: a uniform law is below 1 / (a t), an arcsine law below
        sqrt(2 / (pi a t)), a cut normal law below exp(-(s t)^2 / 2) and what its two ends add, phi(k) / (s t) each.
        """
        bound, power = math.exp(-0.5 * self.normal_variance * t * t), 0.0
        factors = [(1.0 / (a * t), 1.0) for a in self._uniform]
        factors += [(math.sqrt(2.0 / (math.pi * a * t)), 0.5) for a in self._arcsine]
        factors += [(4.0 / (max(1.0 - lean * lean, 1e-9) * (a * t) ** 2), 2.0) for a, lean in self._leaning]
        factors += [(_cut_envelope(cut, t), 1.0) for cut in self._cut]
        factors += [(_pieces_envelope(values, t), 1.0) for values in self._pieces]
        for value, falls in factors:
            if value < 1.0:
                bound *= value
                power += falls
        return bound, power


Cut = tuple[float, float, float, float, float]  # half-width, parent's sigma, both cuts, content


def _product(kernel: Kernel, half_widths: list[float], theta: float, t: Array) -> Array | Complex:
    """Product of a family's kernel over its terms; equal terms are worked on once."""
    a, powers = np.unique(np.array(half_widths), return_counts=True)
    return _powers(kernel(a[:, None], theta, t), powers)


def _powers(M: Array | Complex, powers: NDArray[np.intp]) -> Array | Complex:
    """Product over the rows, each to its power."""
    if not np.all(powers == 1):
        M = M ** powers[:, None]
    return np.asarray(np.prod(M, axis=0))


def _uniform(a: Array, theta: float, t: Array) -> Array | Complex:
    """sinh(a z) / (a z), scaled."""
    if theta == 0.0:
        return np.sinc(a * (t / math.pi))
    y = a * (theta + 1j * t)
    r = a * abs(theta)
    with np.errstate(divide="ignore", invalid="ignore"):
        closed = (np.exp(y - r) - np.exp(-y - r)) / (2.0 * y)
    square = y * y
    series = np.exp(-r) * (1.0 + square / 6.0 * (1.0 + square / 20.0 * (1.0 + square / 42.0)))
    return np.where(np.abs(y) < 0.05, series, closed)


def _arcsine(a: Array, theta: float, t: Array) -> Array | Complex:
    """I_0(a z), scaled; J_0(a t) without tilt."""
    if theta == 0.0:
        return special.j0(a * t)
    return special.ive(0, a * (theta + 1j * t))


def _leaning(y: Complex, lean: float, r: float) -> Complex:
    """Triangular law on [-1, 1] with its peak at ``lean``: second divided difference of exp, scaled by exp(-r)."""
    asked, y = y, np.where(y == 0.0, 1.0, y)  # the place y = 0 is for the quadrature
    if 1.0 - abs(lean) < 1e-9:
        side = 1.0 if lean > 0.0 else -1.0
        u = side * y
        closed = (np.exp(u - r) * (2.0 * u - 1.0) + np.exp(-u - r)) / (2.0 * u * u)
    else:
        ends = (1.0 - lean) * np.exp(-y - r) + (1.0 + lean) * np.exp(y - r)
        closed = (ends - 2.0 * np.exp(lean * y - r)) / ((1.0 - lean * lean) * y * y)
    small = np.abs(asked) < SMALL
    if not small.any():
        return np.asarray(closed)
    return np.where(small, _leaning_by_quadrature(np.where(small, asked, 0.0), lean, r), closed)


def _leaning_by_quadrature(y: Complex, lean: float, r: float) -> Complex:
    total = np.zeros_like(y)
    for start, end in ((-1.0, lean), (lean, 1.0)):
        if end > start:
            x = 0.5 * (start + end) + 0.5 * (end - start) * _NODES
            rise = (x + 1.0) / (1.0 + lean) if start == -1.0 else (1.0 - x) / (1.0 - lean)
            w = 0.5 * (end - start) * _WEIGHTS * rise
            total += np.sum(w * np.exp(y[:, None] * x - r), axis=1)
    return total


def _atoms(values: Array, weights: Array, z: Complex, r: float) -> Complex:
    """Sum of atoms, scaled."""
    step, M = max(1, CHUNK // z.size), np.zeros_like(z)
    for start in range(0, values.size, step):
        part = slice(start, start + step)
        M += np.sum(weights[part, None] * np.exp(values[part, None] * z - r), axis=0)
    return M


def _pieces(values: Array, z: Complex, tilt: float) -> Complex:
    """Mean over the uniform pieces between sorted values (symmetric support), scaled."""
    middle, half = 0.5 * (values[1:] + values[:-1]), 0.5 * (values[1:] - values[:-1])
    reach, step, M = float(values[-1]) * tilt, max(1, CHUNK // (8 * z.size)), np.zeros_like(z)
    for start in range(0, middle.size, step):
        part = slice(start, start + step)
        r = half[part, None] * tilt
        y = half[part, None] * z
        with np.errstate(divide="ignore", invalid="ignore"):
            closed = (np.exp(y - r) - np.exp(-y - r)) / (2.0 * y)
        square = y * y
        series = np.exp(-r) * (1.0 + square / 6.0 * (1.0 + square / 20.0 * (1.0 + square / 42.0)))
        shift = np.exp(middle[part, None] * z + r - reach)
        M += np.sum(shift * np.where(np.abs(y) < 0.05, series, closed), axis=0)
    return np.asarray(M / middle.size)


def _cut_normals(cuts: list[Cut], theta: float, t: Array) -> tuple[Array | Complex, float]:
    """Product over cut normal laws: {exp(w^2/2) [Phi(khi - w) - Phi(klo - w)]} / content, w = s z, scaled.

    Through the Faddeeva function, so that no exponential overflows: each end adds
    exp(+-a z - k^2/2) W(...) / 2, the body exp(w^2/2) is there while klo < Re w < khi. Each law is scaled by the
    largest of its three exponents at t = 0; their sum is given too.
    """
    merged = Counter(cuts)
    half, s, klo, khi, content = (np.array(column)[:, None] for column in zip(*merged, strict=True))
    powers = np.array(list(merged.values()))
    if theta == 0.0 and np.all((np.abs(klo + khi) < 1e-12) & (khi > 0.5)):
        return _powers(_symmetric_at_zero(s * t, khi, content), powers), 0.0
    M, scales = _tilted_cut(theta + 1j * t.astype(np.complex128), half, s, klo, khi, content)
    return _powers(M, powers), float(np.sum(powers * scales[:, 0]))


def _symmetric_at_zero(x: Array, k: Array, content: Array) -> Array:
    """[exp(-x^2/2) - exp(-k^2/2) Re(exp(-i k x) W((-x + i k)/sqrt 2))] / content, one Faddeeva call, real."""
    W = special.wofz((-x + 1j * k) / math.sqrt(2.0))
    return np.asarray((np.exp(-0.5 * x * x) - np.exp(-0.5 * k * k) * (np.exp(-1j * k * x) * W).real) / content)


def _tilted_cut(z: Complex, half: Array, s: Array, klo: Array, khi: Array, content: Array) -> tuple[Complex, Array]:
    """Transforms of cut normal laws, shape (laws, K), and the exponents (laws, 1) that they are scaled by."""
    theta = float(z[0].real)
    w, centre = s * z, -0.5 * (klo + khi) * s  # the parent's centre relative to the middle of the support
    above, below = s * theta > khi, s * theta < klo
    inside = ~(above | below)
    ends = np.maximum(half * theta - 0.5 * khi * khi, -half * theta - 0.5 * klo * klo)
    r = np.where(inside, np.maximum(0.5 * (s * theta) ** 2 + centre * theta, ends), ends)
    root = math.sqrt(2.0)
    # W is taken in the upper half plane, where it is bounded
    W_hi = special.wofz(np.where(above, 1j * (w - khi), 1j * (khi - w)) / root)
    W_lo = special.wofz(np.where(below, 1j * (klo - w), 1j * (w - klo)) / root)
    end_hi = 0.5 * np.exp(half * z - r - 0.5 * khi * khi) * W_hi
    end_lo = 0.5 * np.exp(-half * z - r - 0.5 * klo * klo) * W_lo
    body = np.exp(np.where(inside, 0.5 * w * w + centre * z - r, -np.inf))
    M = (body + np.where(above, end_hi, -end_hi) + np.where(below, end_lo, -end_lo)) / content
    small = np.abs(half * z) < SMALL
    narrow = (khi - klo < 1.0) & small  # close cuts: the closed form cancels
    return np.where(narrow, _cut_by_quadrature(np.where(small, z, 0.0), half, s, klo, khi, content, r), M), r


def _cut_by_quadrature(z: Complex, half: Array, s: Array, klo: Array, khi: Array, content: Array, r: Array) -> Complex:
    total = np.zeros(np.broadcast_shapes(z.shape, half.shape), dtype=np.complex128)
    if not np.any(khi - klo < 1.0):
        return total
    for node, weight in zip(_NODES, _WEIGHTS, strict=True):
        score = 0.5 * (klo + khi) + 0.5 * (khi - klo) * node
        f = 0.5 * (khi - klo) * weight * np.exp(-0.5 * score * score) / (math.sqrt(2.0 * math.pi) * content)
        total += f * np.exp(half * node * z - r)
    return total


def _cut_envelope(cut: Cut, t: float) -> float:
    _, s, klo, khi, content = cut
    x = s * t
    ends = W_EXCESS * (math.exp(-0.5 * klo * klo) + math.exp(-0.5 * khi * khi)) / (math.sqrt(2.0 * math.pi) * x)
    return (math.exp(-0.5 * x * x) + ends) / content


def _pieces_envelope(values: Array, t: float) -> float:
    width = np.maximum(values[1:] - values[:-1], 2.0 / t)  # a piece never counts more than 1
    return float(np.mean(2.0 / (width * t)))
