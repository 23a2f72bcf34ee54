"""Numbers as engineers read them: few digits, and no limit rounded towards the safe side."""

from __future__ import annotations

import math
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from stagesum_schemas.records import Interval, PointConvolution, PointMonteCarlo, Rss, WorstCase

    Ends = Interval | WorstCase | Rss | PointMonteCarlo | PointConvolution

DIGITS = 4
EVEN = 5e-3  # ends that differ in magnitude by less than this share are shown as one


def short(value: float, digits: int = DIGITS) -> str:
    """A number with few significant digits."""
    return "0" if value == 0.0 else f"{value:.{digits}g}"


def outward(value: float, side: int, digits: int = DIGITS) -> str:
    """A number rounded up (side 1) or down (side -1), so that an interval's end never shrinks."""
    if value == 0.0 or not math.isfinite(value):
        return short(value)
    step = digits - 1 - math.floor(math.log10(abs(value)))
    scaled = value * 10.0**step
    # what is whole but for the noise of binary fractions stays as it is
    whole = (
        round(scaled) if abs(scaled - round(scaled)) < 1e-6 else (math.ceil(scaled) if side > 0 else math.floor(scaled))
    )
    return short(whole / 10.0**step, digits)


def interval(ends: Ends) -> str:
    """An interval: one figure with its sign where it is symmetric, else both ends."""
    size = max(abs(ends.lower), abs(ends.upper))
    if size == 0.0:
        return "0"
    if abs(ends.lower + ends.upper) <= EVEN * size:
        return f"±{outward(size, 1)}"
    return f"{outward(ends.lower, -1)} to {outward(ends.upper, 1)}"


def ppm(value: float) -> str:
    """A share in ppm."""
    if value >= 1000.0:
        return f"{value:.0f}"
    return "<0.001" if 0.0 < value < 1e-3 else short(value, 3)


def percent(share: float) -> str:
    """A share in per cent."""
    return f"{100.0 * share:.1f} %"


def bar(share: float, width: int) -> str:
    """A bar of text, as long as the share."""
    return "#" * min(width, max(0, round(share * width)))
