"""The table of operating points: what every method says at each."""

from __future__ import annotations

from typing import TYPE_CHECKING

from stagesum.command.figures import exponent, fixed, inward, outward, parts_per_million, places, scale, short
from stagesum.command.grid import WIDTH, Column, cut, grid, paragraph

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Sequence

    from stagesum_schemas.records import Budget, Interval, Point, PointConvolution, PointMonteCarlo, Rss, WorstCase

    Limits = Interval | WorstCase | Rss | PointMonteCarlo | PointConvolution

MOST_ROWS = 24
GOVERNS = "*"
LONGEST_HEAD = 14
MOST_CONDITIONS = 4
NONE = "-"


def section(budget: Budget) -> list[str]:
    """Draw the table; beyond :data:`MOST_ROWS` points the governing one and the worst stay."""
    shown = rows(budget)
    points = [budget.points[row] for row in shown]
    power = exponent(_errors(points))
    legend = f"errors in {scale(power, budget.unit)}; ppm: outside the limit; {GOVERNS} governs"
    conditions, table = _fitting(budget, shown, list(_columns(points, power)))
    lines = [*paragraph(f"OPERATING POINTS   {legend}", "", "  "), *table]
    left_out = list(points[0].conditions)[conditions:]
    if left_out:
        lines += paragraph(f"Conditions not shown: {', '.join(left_out)}; --json has all.", "", "")
    hidden = len(budget.points) - len(shown)
    if hidden:
        lines.append(f"{hidden} points with smaller errors are not shown; --json has all {len(budget.points)}.")
    return lines


def _fitting(budget: Budget, shown: Sequence[int], columns: Sequence[Column]) -> tuple[int, list[str]]:
    """Give how many conditions leave room for the figures, and the table with those."""
    points = [budget.points[row] for row in shown]
    marks = tuple(GOVERNS if row == budget.governing_point else "" for row in shown)
    table: list[str] = []
    for count in range(MOST_CONDITIONS, -1, -1):
        keys = [Column("", marks), Column("point", tuple(map(str, shown))), *_place(budget, points, count)]
        table = grid(keys, columns)
        if max(map(len, table)) <= WIDTH:
            return count, table
    return 0, table


def rows(budget: Budget) -> list[int]:
    """Give the numbers of the points to show, in their order."""
    everything = range(len(budget.points))
    if len(everything) <= MOST_ROWS:
        return list(everything)
    worst = sorted(everything, key=lambda row: (row != budget.governing_point, -_badness(budget.points[row])))
    return sorted(worst[:MOST_ROWS])


def used(limits: Limits, permitted: Interval) -> float:
    """Give the part of the permitted error that ``limits`` use; 1 is all of it.

    Each end over the permitted one of its side; where zero error isn't permitted, the farthest
    distance from the middle of what is, over half its width.
    """
    if permitted.lower < 0.0 < permitted.upper:
        return max(limits.upper / permitted.upper, limits.lower / permitted.lower)
    middle, half = 0.5 * (permitted.lower + permitted.upper), 0.5 * (permitted.upper - permitted.lower)
    farthest = max(limits.upper - middle, middle - limits.lower)
    return farthest / half if half > 0.0 else float("inf")


def said(point: Point) -> Limits | None:
    """Give the limits of the first method that the answer has, in the order rss, Monte Carlo, exact, worst case."""
    return point.rss or point.monte_carlo or point.convolution or point.worst_case


def _badness(point: Point) -> float:
    limits = said(point)
    if limits is None:
        return 0.0
    return max(-limits.lower, limits.upper) if point.limit is None else used(limits, point.limit)


def _place(budget: Budget, points: Sequence[Point], conditions: int) -> Iterator[Column]:
    """Where a point lies: input, conditions and, where errors aren't at the input, the signal there."""
    yield Column("input", tuple(short(point.input) for point in points))
    for name in list(points[0].conditions)[:conditions]:
        yield Column(cut(name, LONGEST_HEAD), tuple(short(point.conditions[name]) for point in points))
    if budget.refer_to != "input":
        yield Column("nominal", tuple(short(point.nominal) for point in points))


def _columns(points: Sequence[Point], power: int) -> Iterator[Column]:
    """Columns of all methods that at least one point has."""
    worst = [point.worst_case for point in points]
    yield from _limits("limit", [point.limit for point in points], power, inward)
    yield from _limits("exact", worst, power, outward, "worst case")
    yield from _limits("1st order", [part and part.first_order for part in worst], power, outward, "worst case")
    yield from _of_law("rss", [point.rss for point in points], power)
    yield from _of_law("Monte Carlo", [point.monte_carlo for point in points], power)
    yield from _of_law("convolution", [point.convolution for point in points], power)


def _of_law(
    name: str, parts: Sequence[Rss | PointMonteCarlo | PointConvolution | None], power: int
) -> Iterator[Column]:
    """Sigma, limits and share outside of a method that gives a law of the error."""
    sigmas = [part.sigma for part in parts if part]
    if not sigmas:
        return
    decimals = places(sigmas, power)
    cells = tuple(fixed(part.sigma, power, decimals) if part else NONE for part in parts)
    yield Column("sigma", cells, name)
    yield from _limits("limits", parts, power, outward, name)
    if any(part and part.yield_ is not None for part in parts):
        yield Column("ppm", tuple(map(_outside, parts)), name)


def _limits(
    head: str,
    parts: Sequence[Limits | None],
    power: int,
    write: Callable[[float, float, int, int], str],
    group: str = "",
) -> Iterator[Column]:
    ends = [end for part in parts if part for end in (part.lower, part.upper)]
    if ends:
        decimals = places(ends, power)
        cells = (write(part.lower, part.upper, power, decimals) if part else NONE for part in parts)
        yield Column(head, tuple(cells), group)


def _outside(part: Rss | PointMonteCarlo | PointConvolution | None) -> str:
    """Share outside the limit; where no trial was outside, what the interval still allows."""
    if part is None or part.yield_ is None:
        return NONE
    interval = getattr(part, "yield_interval", None)
    if part.yield_ == 1.0 and interval:
        return f"<{parts_per_million(1e6 * (1.0 - interval[0]))}"
    outside = getattr(part, "outside_ppm", None)
    return parts_per_million(1e6 * (1.0 - part.yield_) if outside is None else outside)


def _errors(points: Sequence[Point]) -> Iterator[float]:
    """All ends that the table shows; the common scale comes from them."""
    for point in points:
        for part in (point.limit, point.worst_case, point.rss, point.monte_carlo, point.convolution):
            if part is not None:
                yield from (part.lower, part.upper)
        if point.worst_case is not None:
            yield from (point.worst_case.first_order.lower, point.worst_case.first_order.upper)
