"""Numbers as an engineer writes them: few digits, one scale a table, limits never rounded inwards."""

from __future__ import annotations

import math
from decimal import ROUND_CEILING, ROUND_FLOOR, ROUND_HALF_EVEN, Decimal
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Iterable

DIGITS = 4  # significant digits of the largest number of a column
NOISE = 12  # digits beyond which a double is taken for rounding noise: 0.005000000000000001 is 0.005
SHARE_NOISE = 15  # the same of a share, where what is missing to 1 matters
MOST_PLACES = 9
LEAST_PPM = 1e-6  # below it the rounding of double precision shows


def exponent(values: Iterable[float]) -> int:
    """Give the power of ten, a multiple of three, that brings the largest magnitude to 1 ... 999.

    >>> exponent([0.0117, -0.002])
    -3

    """
    largest = max((abs(value) for value in values), default=0.0)
    return 3 * math.floor(_magnitude(largest) / 3)


def scale(power: int, unit: str) -> str:
    """Name the unit that numbers divided by 10**power are in.

    >>> scale(-3, "bar"), scale(0, "V"), scale(-6, "")
    ('1e-3 bar', 'V', '1e-6')

    """
    return f"1e{power} {unit}".rstrip() if power else unit or "1"


def places(values: Iterable[float], power: int) -> int:
    """Give the decimal places that show the largest of ``values`` / 10**power with four digits."""
    largest = max((abs(value) for value in values), default=0.0)
    return min(max(DIGITS - 1 - _magnitude(largest) + power, 0), MOST_PLACES)


def _magnitude(value: float) -> int:
    return math.floor(math.log10(value)) if value else 0


def fixed(value: float, power: int, decimals: int, rounding: str = ROUND_HALF_EVEN) -> str:
    """Write ``value`` / 10**power with ``decimals`` places.

    >>> fixed(0.0117489, -3, 2, ROUND_CEILING)
    '11.75'

    """
    exact = Decimal(f"{value:.{NOISE}g}").scaleb(-power)
    if exact and exact.adjusted() >= MOST_PLACES:  # far beyond the scale of its table
        return f"{exact.quantize(Decimal(1).scaleb(exact.adjusted() - DIGITS + 1), rounding):e}"
    rounded = exact.quantize(Decimal(1).scaleb(-decimals), rounding)
    return f"{abs(rounded) if rounded.is_zero() else rounded:f}"  # no "-0.00"


def outward(lower: float, upper: float, power: int, decimals: int) -> str:
    """Write what an error may reach: each end rounded away from the middle.

    >>> outward(-0.00011, 0.00012, -3, 2)
    '-0.11 .. 0.12'
    >>> outward(-0.000111, 0.000112, -3, 2)
    '+-0.12'

    """
    return _interval(
        fixed(lower, power, decimals, ROUND_FLOOR),
        fixed(upper, power, decimals, ROUND_CEILING),
    )


def inward(lower: float, upper: float, power: int, decimals: int) -> str:
    """Write what is permitted: each end rounded towards the middle."""
    return _interval(
        fixed(lower, power, decimals, ROUND_CEILING),
        fixed(upper, power, decimals, ROUND_FLOOR),
    )


def _interval(lower: str, upper: str) -> str:
    if lower == f"-{upper}":
        return f"+-{upper}"
    return f"{lower} .. {upper}"


def short(value: float) -> str:
    """Write a lone number with up to six digits."""
    return f"{value:.6g}"


def percent(share: float, rounding: str = ROUND_HALF_EVEN) -> str:
    """Write a share; the digits go as far as what is missing to 100 % needs.

    >>> percent(0.999932), percent(0.9998), percent(1.0)
    ('99.9932 %', '99.98 %', '100 %')
    >>> percent(0.99979999, ROUND_FLOOR)
    '99.979 %'

    """
    missing = 100.0 * (1.0 - share)
    decimals = min(max(1 - _magnitude(missing), 2), MOST_PLACES) if missing > 0.0 else 0
    exact = Decimal(f"{share:.{SHARE_NOISE}g}").scaleb(2)
    text = f"{exact.quantize(Decimal(1).scaleb(-decimals), rounding):f}"
    return f"{text.rstrip('0').rstrip('.') if '.' in text else text} %"


def parts_per_million(value: float) -> str:
    """Write a share outside the limit, in ppm, with three digits.

    >>> parts_per_million(3842.475), parts_per_million(0.0123), parts_per_million(0.0)
    ('3842', '0.0123', '0')

    """
    if 0.0 < value < LEAST_PPM:
        return "<1e-6"
    return f"{value:.0f}" if value >= 100.0 else f"{value:.3g}"
