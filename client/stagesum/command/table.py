"""A budget as text for a terminal: aligned, at most WIDTH columns, the verdict last."""

from __future__ import annotations

import textwrap
from typing import TYPE_CHECKING

from stagesum.command.numbers import bar, interval, outward, percent, ppm, short

if TYPE_CHECKING:
    from collections.abc import Iterator, Sequence

    from stagesum_schemas.records import Budget, Contribution, Point

WIDTH = 120
MOST_POINTS = 24
BAR = 20
NAMES = {"worst_case": "worst case", "rss": "rss", "monte_carlo": "Monte Carlo", "convolution": "convolution"}


def draw(budget: Budget) -> str:
    """Write a budget; sections that the answer hasn't are left out."""
    sections = [_head(budget), _points(budget), _contributions(budget), _readings(budget), _methods(budget)]
    sections += [_list("Assumptions", budget.assumptions), _list("Cautions", budget.cautions), _verdict(budget)]
    return "\n\n".join("\n".join(lines) for lines in sections if lines)


def _head(budget: Budget) -> list[str]:
    span = f", span {short(budget.span)} {budget.unit}" if budget.span is not None else ""
    head = (
        f"Error referred to {budget.refer_to}, in {budget.unit or 'plain numbers'}; coverage {budget.coverage:g}{span}"
    )
    return [budget.title, head] if budget.title else [head]


def _columns(rows: Sequence[Sequence[str]], left: int = 0) -> list[str]:
    """Align rows of cells; the first ``left`` columns to the left, the others to the right."""
    widths = [max(len(row[i]) for row in rows) for i in range(len(rows[0]))]
    return [
        "  ".join(
            cell.ljust(width) if i < left else cell.rjust(width)
            for i, (cell, width) in enumerate(zip(row, widths, strict=True))
        ).rstrip()
        for row in rows
    ]


# ---------------------------------------------------------------------------------------------
# Operating points


def _points(budget: Budget) -> list[str]:
    shown = _shown(budget)
    heads = ["", "point", "input", *budget.points[0].conditions, *_method_heads(budget.points[0])]
    rows = [heads] + [_point_row(budget, i) for i in shown]
    lines = ["Operating points (> governs)", *_columns(rows)]
    hidden = len(budget.points) - len(shown)
    if hidden:
        lines.append(f"... {hidden} more points with smaller errors; --json has all")
    return lines


def _shown(budget: Budget) -> list[int]:
    """The governing point and those with the largest errors, in their order."""
    if len(budget.points) <= MOST_POINTS:
        return list(range(len(budget.points)))
    order = sorted(range(len(budget.points)), key=lambda i: -_size(budget.points[i]))
    chosen = [budget.governing_point, *(i for i in order if i != budget.governing_point)]
    return sorted(chosen[:MOST_POINTS])


def _size(point: Point) -> float:
    """Largest error at a point by the methods at hand, relative to the limit where there is one."""
    found = [m for m in (point.rss, point.convolution, point.monte_carlo, point.worst_case) if m is not None]
    size = max(abs(found[0].lower), abs(found[0].upper))
    half = 0.5 * (point.limit.upper - point.limit.lower) if point.limit else 1.0
    return size / half if half > 0.0 else size


def _method_heads(point: Point) -> Iterator[str]:
    if point.limit:
        yield "limit"
    if point.worst_case:
        yield from ("worst case", "first order")
    if point.rss:
        yield from ("sigma", "rss")
    if point.monte_carlo:
        yield "Monte Carlo"
    if point.convolution:
        yield "convolution"


def _point_row(budget: Budget, i: int) -> list[str]:
    point = budget.points[i]
    row = [">" if i == budget.governing_point else "", str(i), short(point.input)]
    row += [short(value) for value in point.conditions.values()]
    row += [interval(point.limit)] if point.limit else []
    if point.worst_case:
        row += [interval(point.worst_case), interval(point.worst_case.first_order)]
    if point.rss:
        row += [short(point.rss.sigma), interval(point.rss) + (" cut" if point.rss.cut else "")]
    row += [interval(point.monte_carlo)] if point.monte_carlo else []
    row += [interval(point.convolution)] if point.convolution else []
    return row


# ---------------------------------------------------------------------------------------------
# Contributions


def _contributions(budget: Budget) -> list[str]:
    title = f"Contributions at point {budget.governing_point}"
    rows = [["source", "", "variance", "bound", "of worst case", "sigma"]]
    rows += [_contribution_row(row) for row in budget.contributions]
    parts = budget.variance_parts
    fixed = f"{percent(parts.unit)} of the variance is a built unit's own, {percent(parts.reading)} is new at every reading."
    return [title, *_columns(rows, left=2), fixed]


def _contribution_row(row: Contribution) -> list[str]:
    return [
        f"{row.stage}/{row.source}"[:48],
        bar(row.variance_share, BAR),
        percent(row.variance_share),
        outward(abs(row.bound), 1),
        percent(row.bound_share),
        short(row.contribution_sigma),
    ]


def _readings(budget: Budget) -> list[str]:
    lines = ["Data sheet lines as they were read"]
    for row in budget.contributions:
        lines += _wrapped(f"{row.stage}/{row.source}: {row.reading}", "  ")
    return lines


# ---------------------------------------------------------------------------------------------
# What the methods say


def _methods(budget: Budget) -> list[str]:
    verdict, point = budget.verdict, budget.points[budget.governing_point]
    if verdict is None or point.limit is None:
        return []
    lines = [
        f"Against the limit ({interval(point.limit)} {budget.unit} at point {budget.governing_point}), {_target(verdict.yield_)}"
    ]
    rows = [[f"  {NAMES[name]}", said, words] for name, said, words in _sayings(budget)]
    lines += _columns(rows, left=3)
    if budget.checks:
        lines.append(f"  Check of rss: {budget.checks.detail}.")
    return lines


def _target(share: float) -> str:
    return f"yield to reach {share:.10g} ({ppm(1e6 * (1.0 - share))} ppm outside)"


def _sayings(budget: Budget) -> Iterator[tuple[str, str, str]]:
    """Method, verdict and reason."""
    verdict, points = budget.verdict, budget.points
    if verdict is None:
        return
    if verdict.worst_case:
        beyond = sum(
            p.worst_case.lower < p.limit.lower or p.worst_case.upper > p.limit.upper
            for p in points
            if p.worst_case and p.limit
        )
        yield "worst_case", verdict.worst_case, f"beyond the limit at {beyond} of {len(points)} points"
    if verdict.rss:
        worst = max(p.rss.outside_ppm or 0.0 for p in points if p.rss)
        yield "rss", verdict.rss, f"{ppm(worst)} ppm outside at the worst point, if the sum were normal"
    if verdict.monte_carlo and budget.monte_carlo and budget.monte_carlo.joint_yield_interval:
        m = budget.monte_carlo
        low, high = m.joint_yield_interval or (0.0, 1.0)
        words = f"joint yield {m.joint_yield:.6f} ({low:.6f} to {high:.6f}) over all points, {m.trials} trials, seed {m.seed}"
        yield "monte_carlo", verdict.monte_carlo, words
    if verdict.convolution:
        shares = [p.convolution.outside_ppm or 0.0 for p in points if p.convolution]
        words = f"{ppm(max(shares))} ppm outside at the worst point, at most {ppm(sum(shares))} ppm over all"
        yield "convolution", verdict.convolution, words


def _verdict(budget: Budget) -> list[str]:
    if budget.verdict is None:
        return ["VERDICT: none, no limit was given"]
    by = ", ".join(NAMES[name] for name in budget.verdict.by)
    return [f"VERDICT: {budget.verdict.overall.upper()} (decided by {by})"]


def _list(title: str, sentences: tuple[str, ...]) -> list[str]:
    return [title] + [line for sentence in sentences for line in _wrapped(sentence, "- ")] if sentences else []


def _wrapped(text: str, indent: str) -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=indent, subsequent_indent=" " * (len(indent) + 2))
