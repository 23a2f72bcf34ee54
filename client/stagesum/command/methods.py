"""What each method says at the governing point, the joint yield, and the verdict."""

from __future__ import annotations

from decimal import ROUND_CEILING, ROUND_FLOOR
from typing import TYPE_CHECKING

from stagesum.command.figures import exponent, outward, percent, places, scale, short
from stagesum.command.grid import paragraph
from stagesum.command.operating_points import used

if TYPE_CHECKING:
    from collections.abc import Iterator

    from stagesum_schemas.records import Budget, MonteCarlo, Point

NAMES = {"worst_case": "worst case", "rss": "rss", "monte_carlo": "Monte Carlo", "convolution": "convolution"}
INDENT = " " * 15


def section(budget: Budget) -> list[str]:
    """One paragraph a method, then the joint yield and whether the simple method holds."""
    point = budget.points[budget.governing_point]
    lines = [f"WHAT EACH METHOD SAYS   at point {budget.governing_point}, which governs"]
    for method, name in NAMES.items():
        text = _says(budget, point, method)
        if text:
            lines += paragraph(text, f"  {name}".ljust(len(INDENT)), INDENT)
    for name, text in _of_all_points(budget):
        lines += paragraph(text, f"  {name}".ljust(len(INDENT)), INDENT)
    return lines if len(lines) > 1 else []


def verdict(budget: Budget) -> list[str]:
    """Tell the overall verdict, what decided it, and what the other methods say."""
    found = budget.verdict
    if found is None:
        return ["VERDICT: none, no limit is given"]
    words = {name: getattr(found, method) for method, name in NAMES.items() if getattr(found, method)}
    deciding = [NAMES.get(method, method) for method in found.by]
    others = [f"{name} {word}" for name, word in words.items() if name not in deciding]
    text = f"VERDICT: {found.overall.upper()}, decided by {_listed(words, deciding)}"
    text += f" at a target yield of {percent(found.yield_)}"
    return paragraph(text + (f"; not deciding: {', '.join(others)}" if others else ""), "", "  ")


def _listed(words: dict[str, str], deciding: list[str]) -> str:
    return ", ".join(f"{name} ({words.get(name, 'no verdict')})" for name in deciding)


def _says(budget: Budget, point: Point, method: str) -> str:
    """Limits at the governing point, how much of the permitted error they use, the method's own figures."""
    part = getattr(point, method)
    if part is None:
        return ""
    said = [_plain(part.lower, part.upper, budget.unit)]
    if point.limit is not None:
        said.append(f"{100.0 * used(part, point.limit):.4g} % of the limit")
    said += _own_figures(point, method)
    word = getattr(budget.verdict, method, None)
    return ", ".join(said) + (f": {word}" if word else "")


def _plain(lower: float, upper: float, unit: str) -> str:
    """Write an interval in the unit itself, unless that takes too many places."""
    power = exponent((lower, upper))
    if -6 <= power <= 3:
        return f"{outward(lower, upper, 0, places((lower, upper), 0))} {unit}".rstrip()
    return f"({outward(lower, upper, power, places((lower, upper), power))}) x {scale(power, unit)}"


def _own_figures(point: Point, method: str) -> Iterator[str]:
    """Figures that only this method has."""
    if method == "worst_case":
        yield "every source at its worst at once"
    if method == "rss" and point.rss is not None:
        yield f"mean +- {point.rss.coverage_factor:.4g} sigma"
        if point.rss.cut:
            yield "cut at the worst case"
        if point.rss.dof is not None:
            yield f"{short(point.rss.dof)} degrees of freedom"
        if point.rss.cpk is not None:
            yield f"Cpk {point.rss.cpk:.3g}"
    if method == "monte_carlo":
        yield "trials of the exact chain"
    if method == "convolution":
        yield "exact law of the first-order error"


def _of_all_points(budget: Budget) -> Iterator[tuple[str, str]]:
    if budget.monte_carlo is not None:
        yield "trials", _trials(budget.monte_carlo)
        if budget.monte_carlo.joint_yield is not None:
            yield "joint yield", _joint_yield(budget.monte_carlo)
    parts = budget.variance_parts
    yield "variance", f"{percent(parts.unit)} fixed for a built unit, {percent(parts.reading)} new at every reading"
    if budget.checks is not None:
        yield "check", f"{budget.checks.detail}; worst at point {budget.checks.point}"


def _trials(found: MonteCarlo) -> str:
    text = f"{found.trials}, seed {found.seed}"
    if not found.adaptive:
        return text
    return f"{text}, chosen by the required stability{'' if found.converged else ' (NOT reached)'}"


def _joint_yield(found: MonteCarlo) -> str:
    text = f"{percent(found.joint_yield or 0.0, ROUND_FLOOR)} of the units are inside the limit at every point"
    if not found.joint_yield_interval:
        return text
    lower, upper = found.joint_yield_interval
    text += f" (95 % confidence: {percent(lower, ROUND_FLOOR)} .. {percent(upper, ROUND_CEILING)})"
    if found.sampling == "importance" and found.effective_trials is not None:
        text += f", by importance sampling worth {found.effective_trials:.2g} plain trials"
    return text
