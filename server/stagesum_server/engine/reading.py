"""From a data sheet line to a law: which distribution typ, min, max, mean or samples stand for.

Every reading is told back in one sentence, and what the caller did not state is an assumption.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from stagesum_server.engine import laws

if TYPE_CHECKING:
    from collections.abc import Callable

    from stagesum_schemas.records import RulesSpec

DEFAULT_TOP_RATIO = 0.5
DEFAULT_MAX_SIGMAS = 3.0


class UnreadableError(ValueError):
    """A data sheet line that can't be read; ``member`` names the figure at fault."""

    def __init__(self, member: str, detail: str) -> None:
        super().__init__(detail)
        self.member, self.detail = member, detail


@dataclass(frozen=True)
class Figures:
    """The figures of one data sheet line, all in ``unit``."""

    unit: str
    typ: float | None = None
    min: float | None = None
    max: float | None = None
    mean: float | None = None
    shape: str | None = None
    samples: tuple[float, ...] | None = None
    dof: float | None = None
    top_ratio: float | None = None

    @property
    def limits(self) -> tuple[float, float] | None:
        """The data sheet's limits: ``max`` alone stands for +-max."""
        if self.max is None:
            return None
        return (-self.max if self.min is None else self.min), self.max

    @property
    def centre(self) -> float:
        """The stated mean, else the middle of the limits, else zero."""
        if self.mean is not None:
            return self.mean
        return 0.5 * sum(self.limits) if self.limits else 0.0

    def show(self, value: float) -> str:
        """Write a value with its unit."""
        return f"{value:.6g} {self.unit}".rstrip()


@dataclass(frozen=True)
class Reading:
    """A law, the sentence that tells it back, and what was assumed."""

    law: laws.Law
    sentence: str
    assumptions: tuple[str, ...] = ()


def read(figures: Figures, rules: RulesSpec) -> Reading:
    """Read one data sheet line (model.md, section 3).

    Raises
    ------
    UnreadableError
        Where the figures contradict each other or don't suffice; names the member at fault.

    """
    _refuse_contradictions(figures)
    shape = figures.shape or _default_shape(figures, rules)
    return SHAPES[shape](figures, rules)


def _default_shape(figures: Figures, rules: RulesSpec) -> str:
    if figures.samples is not None:
        return "samples"
    if figures.limits is None:
        return "normal"
    if figures.typ is not None or rules.max_sigmas is not None:
        return "truncated_normal"
    return "uniform"


# ---------------------------------------------------------------------------------------------
# What contradicts itself


def _refuse_contradictions(figures: Figures) -> None:
    _refuse_missing_or_mixed(figures)
    if figures.samples is None:
        _refuse_limits(figures)
        _refuse_typ_and_mean(figures)
    if figures.top_ratio is not None and figures.shape != "trapezoidal":
        raise UnreadableError(
            "top_ratio", "top_ratio belongs to the shape trapezoidal; leave it out or name that shape"
        )


def _refuse_missing_or_mixed(figures: Figures) -> None:
    others = [name for name in ("typ", "min", "max", "mean") if getattr(figures, name) is not None]
    if figures.samples is not None:
        if others:
            raise UnreadableError(others[0], "samples stand alone: leave out typ, min, max and mean")
        if figures.shape not in (None, "samples"):
            raise UnreadableError("shape", f"samples have the shape samples, found {figures.shape}")
    elif figures.typ is None and figures.max is None:
        if figures.min is not None:
            raise UnreadableError("min", "min needs max beside it; max alone means +-max")
        raise UnreadableError("", "no figure to read: give typ, max, min and max, or samples")


def _refuse_limits(figures: Figures) -> None:
    if figures.limits is None:
        if figures.min is not None:
            raise UnreadableError("min", "min needs max beside it; max alone means +-max")
        return
    low, high = figures.limits
    if figures.min is None and high <= 0.0:
        raise UnreadableError("max", f"found {figures.show(high)}; max alone means +-max and must be positive")
    if low >= high:
        raise UnreadableError("max", f"max {figures.show(high)} must be larger than min {figures.show(low)}")


def _refuse_typ_and_mean(figures: Figures) -> None:
    typ, limits, mean = figures.typ, figures.limits, figures.mean
    if typ is not None and typ <= 0.0:
        raise UnreadableError("typ", f"found {figures.show(typ)}; typ is a magnitude and must be positive")
    if limits is None:
        return
    if typ is not None and typ > max(abs(limits[0]), abs(limits[1])):
        raise UnreadableError("typ", f"typ {figures.show(typ)} lies beyond max {figures.show(limits[1])}")
    if mean is not None and not limits[0] < mean < limits[1]:
        raise UnreadableError("mean", f"mean {figures.show(mean)} must lie between {_span(figures)}")


def _span(figures: Figures) -> str:
    low, high = _limits(figures)
    return f"{low:.6g} and {figures.show(high)}"


def _limits(figures: Figures) -> tuple[float, float]:
    limits = figures.limits
    if limits is None:
        raise UnreadableError("shape", f"the shape {figures.shape} needs max, or min and max")
    return limits


# ---------------------------------------------------------------------------------------------
# Parent sigma of the normal shapes


def _content_inside_typ(typ: float, m: float, s: float, low: float, high: float) -> float:
    """Share of a normal law (m, s) cut at low and high that lies inside +-typ."""
    inside = laws.normal_content((max(-typ, low) - m) / s, (min(typ, high) - m) / s)
    return float(inside / laws.normal_content((low - m) / s, (high - m) / s))


def _sigma_from_cover(figures: Figures, share: float, low: float, high: float) -> float:
    """Parent sigma for which ``share`` of the shipped parts lies inside +-typ, by bisection on its logarithm."""
    typ, m = figures.typ or 0.0, figures.centre
    if abs(m) >= typ:
        raise UnreadableError("typ", f"typ {figures.show(typ)} must exceed the mean's magnitude {figures.show(abs(m))}")
    widest = (min(typ, high) - max(-typ, low)) / (high - low)  # what a parent of infinite sigma leaves inside
    if math.isfinite(high - low) and share <= widest:
        raise UnreadableError(
            "typ",
            f"typ_covers {share:g} can't be met: even a flat law between {_span(figures)} has {widest:.4g} of its "
            f"parts inside +-typ {figures.show(typ)}, and a cut normal law has more; use a larger share or no typ_covers",
        )
    shrink, grow = math.log(1e-6 * (typ - abs(m))), math.log(1e6 * typ)
    for _ in range(100):
        middle = 0.5 * (shrink + grow)
        if _content_inside_typ(typ, m, math.exp(middle), low, high) > share:
            shrink = middle
        else:
            grow = middle
    return math.exp(0.5 * (shrink + grow))


def _parent_sigma(figures: Figures, rules: RulesSpec, low: float, high: float) -> tuple[float, str]:
    """Parent sigma of a normal law with the cuts low and high (infinite where uncut), and the words for it."""
    typ = figures.typ
    if typ is None:
        sigmas = rules.max_sigmas or DEFAULT_MAX_SIGMAS
        bottom, top = _limits(figures)
        sigma = 0.5 * (top - bottom) / sigmas
        return sigma, f"sigma = max / {sigmas:g} = {figures.show(sigma)}"
    if rules.typ_covers is not None:
        sigma = _sigma_from_cover(figures, rules.typ_covers, low, high)
        return sigma, f"sigma = {figures.show(sigma)} so that {rules.typ_covers:g} of the parts are inside +-typ"
    divisor = "" if rules.typ_sigmas == 1.0 else f" / {rules.typ_sigmas:g}"
    if math.isinf(high) or figures.centre == 0.0:
        sigma = typ / rules.typ_sigmas
        return sigma, f"sigma = typ{divisor} = {figures.show(sigma)}"
    sigma = (typ - abs(figures.centre)) / rules.typ_sigmas
    if sigma <= 0.0:
        raise UnreadableError(
            "typ",
            f"typ {figures.show(typ)} is read as abs(mean) + {rules.typ_sigmas:g} sigma, so it must exceed the mean's "
            f"magnitude {figures.show(abs(figures.centre))}",
        )
    return sigma, f"sigma = (typ - abs(mean)){divisor} = {figures.show(sigma)}"


# ---------------------------------------------------------------------------------------------
# One reader a shape


def _given(figures: Figures) -> str:
    names = [name for name in ("typ", "min", "max", "mean") if getattr(figures, name) is not None]
    words = " and ".join(names) if len(names) < 3 else ", ".join(names)
    return f"{words} only" if len(names) == 1 else words


def _named(figures: Figures, default: str) -> str:
    """Say whether the shape was the caller's or the rule's."""
    return default if figures.shape is None else f"{default} as named"


def _unbounded_limits(figures: Figures, rules: RulesSpec, sigma: float) -> tuple[float, float, str, tuple[str, ...]]:
    """Worst-case bounds of a law without limits of its own, the words for them, and the assumption."""
    if figures.limits is not None:
        return (*figures.limits, f"nothing is screened, {_span(figures)} bound the worst case only", ())
    k = rules.unbounded_sigmas
    bounds = figures.centre - k * sigma, figures.centre + k * sigma
    assumption = f"no limit is given, so the worst case takes {k:g} sigma"
    return (*bounds, f"no limit is given, the worst case takes {k:g} sigma", (assumption,))


def _read_normal(figures: Figures, rules: RulesSpec) -> Reading:
    sigma, words = _parent_sigma(figures, rules, -math.inf, math.inf)
    low, high, bounds, assumptions = _unbounded_limits(figures, rules, sigma)
    law = laws.Normal(figures.centre, sigma, low, high, declared=figures.limits is not None)
    return Reading(law, f"{_given(figures)}: {_named(figures, 'normal')}, {words}; {bounds}", assumptions)


def _read_truncated_normal(figures: Figures, rules: RulesSpec) -> Reading:
    low, high = _limits(figures)
    sigma, words = _parent_sigma(figures, rules, low, high)
    law = laws.TruncatedNormal(figures.centre, sigma, low, high)
    if law.content < 1e-12:
        raise UnreadableError("mean", f"a normal law with {words} has next to nothing between {_span(figures)}")
    sentence = f"{_given(figures)}: {_named(figures, 'normal')}, parent {words}, cut at {_span(figures)}"
    assumed = (
        "typ and max are read as a normal law cut at the limits (common practice: parts beyond are rejected at test)"
    )
    return Reading(law, sentence, (assumed,) if figures.shape is None and figures.typ is not None else ())


def _read_uniform(figures: Figures, rules: RulesSpec) -> Reading:
    low, high = _limits(figures)
    _refuse_other_mean(figures, "uniform")
    sentence = f"{_given(figures)}: {_named(figures, 'uniform')} between {_span(figures)} (half-width / sqrt 3)"
    assumed = "limits alone are read as a uniform law (JCGM 100:2008, 4.3.7)"
    return Reading(laws.Uniform(low, high), sentence, (assumed,) if figures.shape is None else ())


def _read_triangular(figures: Figures, rules: RulesSpec) -> Reading:
    low, high = _limits(figures)
    mode = 3.0 * figures.centre - low - high
    if not low <= mode <= high:
        raise UnreadableError(
            "mean",
            f"a triangular law between {_span(figures)} has its mean within the middle third; found "
            f"{figures.show(figures.centre)}",
        )
    law = laws.Triangular(low, high, mode)
    return Reading(law, f"{_given(figures)}: triangular between {_span(figures)}, peak at {figures.show(mode)}")


def _read_trapezoidal(figures: Figures, rules: RulesSpec) -> Reading:
    low, high = _limits(figures)
    _refuse_other_mean(figures, "trapezoidal")
    ratio = DEFAULT_TOP_RATIO if figures.top_ratio is None else figures.top_ratio
    assumed = () if figures.top_ratio is not None else (f"a trapezoidal law's top is {ratio:g} of its base",)
    words = f"{_given(figures)}: trapezoidal between {_span(figures)}, top / base = {ratio:g}"
    return Reading(laws.Trapezoidal(low, high, ratio), words, assumed)


def _read_arcsine(figures: Figures, rules: RulesSpec) -> Reading:
    low, high = _limits(figures)
    _refuse_other_mean(figures, "arcsine")
    return Reading(
        laws.Arcsine(low, high), f"{_given(figures)}: arcsine between {_span(figures)} (half-width / sqrt 2)"
    )


def _read_two_point(figures: Figures, rules: RulesSpec) -> Reading:
    low, high = _limits(figures)
    p_upper = (figures.centre - low) / (high - low)
    law = laws.TwoPoint(low, high, p_upper)
    return Reading(
        law, f"{_given(figures)}: either {low:.6g} or {figures.show(high)}, the latter with probability {p_upper:.6g}"
    )


def _read_student_t(figures: Figures, rules: RulesSpec) -> Reading:
    if figures.dof is None or figures.dof <= 2.0:
        raise UnreadableError(
            "dof", f"student_t needs dof above 2 (it has no standard deviation else), found {figures.dof}"
        )
    if figures.typ is None:
        raise UnreadableError("shape", "student_t needs typ, its scale (the standard uncertainty s / sqrt n)")
    scale, words = _parent_sigma(figures, rules, -math.inf, math.inf)
    spread = scale * math.sqrt(figures.dof / (figures.dof - 2.0))
    low, high, bounds, assumptions = _unbounded_limits(figures, rules, spread)
    law = laws.StudentT(figures.centre, scale, figures.dof, low, high, declared=figures.limits is not None)
    scale_words = words.replace("sigma", "scale")
    return Reading(
        law, f"{_given(figures)}: Student t, {figures.dof:g} degrees of freedom, {scale_words}; {bounds}", assumptions
    )


def _read_samples(figures: Figures, rules: RulesSpec) -> Reading:
    values = figures.samples
    if values is None:
        raise UnreadableError("shape", "the shape samples needs samples: a list of measured values")
    if min(values) == max(values):
        raise UnreadableError(
            "samples", f"all samples are {figures.show(values[0])}; at least two different values are needed"
        )
    law = laws.Samples(np.array(values, dtype=np.float64))
    words = (
        f"their empirical law between {law.lower:.6g} and {figures.show(law.upper)}, linear between order statistics"
    )
    return Reading(law, f"{len(values)} samples: {words}")


def _refuse_other_mean(figures: Figures, shape: str) -> None:
    middle = 0.5 * sum(_limits(figures))
    if figures.mean is not None and not math.isclose(figures.mean, middle, rel_tol=1e-12, abs_tol=1e-300):
        raise UnreadableError(
            "mean",
            f"a {shape} law between {_span(figures)} has its mean at {figures.show(middle)}, found "
            f"{figures.show(figures.mean)}; give min and max about that mean, or name another shape",
        )


SHAPES: dict[str, Callable[[Figures, RulesSpec], Reading]] = {
    "normal": _read_normal,
    "truncated_normal": _read_truncated_normal,
    "uniform": _read_uniform,
    "triangular": _read_triangular,
    "trapezoidal": _read_trapezoidal,
    "arcsine": _read_arcsine,
    "two_point": _read_two_point,
    "student_t": _read_student_t,
    "samples": _read_samples,
}
