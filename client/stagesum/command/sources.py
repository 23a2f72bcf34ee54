"""The contributions: each source's share, drawn as a bar, and how its data sheet line was read."""

from __future__ import annotations

from decimal import ROUND_CEILING, ROUND_HALF_EVEN
from typing import TYPE_CHECKING

from stagesum.command.figures import exponent, fixed, places, scale, short
from stagesum.command.grid import Column, bar, cut, grid, paragraph

if TYPE_CHECKING:
    from collections.abc import Sequence

    from stagesum_schemas.records import Budget, Contribution

MOST_SOURCES = 40
LONGEST_NAME = 36  # with both bars the line keeps within the width
LEAST_OF_STAGE = 12


def section(budget: Budget) -> list[str]:
    """Draw the sources in the answer's order: largest share of the variance first."""
    shown = budget.contributions[:MOST_SOURCES]
    if not shown:
        return []
    power = exponent(part.bound for part in shown)
    heading = f"CONTRIBUTIONS   at point {budget.governing_point}, in {scale(power, budget.unit)}"
    lines = [heading, *_with_readings(grid([], _columns(shown, power)), shown, budget)]
    hidden = len(budget.contributions) - len(shown)
    if hidden:
        lines.append(f"{hidden} smaller sources are not shown; --json has all {len(budget.contributions)}.")
    return lines


def _columns(shown: Sequence[Contribution], power: int) -> list[Column]:
    names = tuple(map(_name, shown))
    variances, bounds = [part.variance_share for part in shown], [part.bound_share for part in shown]
    return [
        Column("source", names, left=True),
        Column("varies by", tuple(part.varies_by for part in shown), left=True),
        Column("sigma", _numbers([part.contribution_sigma for part in shown], power)),
        Column("of variance", tuple(map(_percent, variances))),
        Column("", tuple(map(bar, variances)), left=True),
        Column("bound", _numbers([part.bound for part in shown], power, ROUND_CEILING)),
        Column("of bound", tuple(map(_percent, bounds))),
        Column("", tuple(map(bar, bounds)), left=True),
    ]


def _name(part: Contribution) -> str:
    """Give ``stage/source``; where that is too long the stage's name is cut first."""
    stage = cut(part.stage, max(LONGEST_NAME - 1 - len(part.source), LEAST_OF_STAGE))
    return cut(f"{stage}/{part.source}", LONGEST_NAME)


def _numbers(values: list[float], power: int, rounding: str = ROUND_HALF_EVEN) -> tuple[str, ...]:
    decimals = places(values, power)
    return tuple(fixed(value, power, decimals, rounding) for value in values)


def _percent(share: float) -> str:
    return "<0.1 %" if 0.0 < share < 0.0005 else f"{100.0 * share:.1f} %"


def _with_readings(lines: list[str], shown: Sequence[Contribution], budget: Budget) -> list[str]:
    """Put below each source's line the sentence that tells how its figures were read."""
    heads = len(lines) - len(shown)  # the last lines are one a source
    mixed = lines[:heads]
    for line, part in zip(lines[heads:], shown, strict=True):
        mixed += [line, *paragraph(part.reading + _elsewhere(part, budget), "    ", "      ")]
    return mixed


def _elsewhere(part: Contribution, budget: Budget) -> str:
    """Tell where a source matters more than at the governing point."""
    largest = part.largest
    if largest.bound == 0.0:
        return "; no part in the error at any point"
    if largest.bound <= part.bound * (1.0 + 1e-6):
        return ""
    return f"; largest at point {largest.point}: bound {short(largest.bound)} {budget.unit}".rstrip()
