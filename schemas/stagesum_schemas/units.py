"""Units and quantities: a number and a unit, and nothing else.

No general unit parser ever sees request text: the grammar is a number, then a unit made of names of the closed table
(``unit_table``) joined by ``*`` (or ``·``) and ``/``, each with a small power, ``sqrt(...)`` or ``√``. ``/`` divides by
the one name after it: ``a/b/c`` is ``a/(b*c)``, ``a/b*c`` is ``a*c/b``; parentheses stand after ``/`` only. A name of
the table wins over a prefix and a name: ``min`` is the minute, ``Pa`` the pascal, ``cd`` the candela; ``m`` alone is
the metre, as a prefix alone is no unit. ``degC`` in a unit is a difference, 1 K.
"""

from __future__ import annotations

import difflib
import math
import re
from dataclasses import dataclass
from fractions import Fraction
from functools import cache, lru_cache
from itertools import takewhile

from stagesum_schemas.unit_table import ALIASES, BASE, COHERENT, HINTS, PREFIXES, SPELLINGS, TABLE

LONGEST = 64  # characters of a quantity
CACHED = 4096  # texts kept parsed
HIGHEST_POWER = 6
LARGEST = Fraction(10) ** 60  # factor to coherent SI of a unit as written; the smallest is its reciprocal
ZERO_IN_KELVIN = {"degC": Fraction("273.15"), "degF": Fraction("459.67") * Fraction(5, 9)}

_NUMBER = re.compile(r"[+-]?(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_FACTOR = re.compile(
    r"(?:(?:sqrt|√)\((?P<root>[^\W\d_]+|°[CF])\)|√(?P<sign>[^\W\d_]+)|(?P<name>[^\W\d_]+|°[CF]?|%))"
    r"(?:\^(?P<power>-?[0-9]+(?:\.[0-9]+)?))?"
)
_USUAL_POWERS = f"powers go from 0.5 to {HIGHEST_POWER} in steps of 0.5"

Dimension = tuple[Fraction, ...]


class UnitError(ValueError):
    """A text that is no quantity, or units that don't go together; the message says what would be right."""


@dataclass(frozen=True, slots=True)
class Unit:
    """A product of named units to powers.

    ``terms`` are (name, power), those above the line first, else as written; ``dimension`` the exponents over
    ``unit_table.BASE``; ``factor`` the factor to coherent SI: exact, but for roots of numbers that are no squares.
    """

    terms: tuple[tuple[str, Fraction], ...]
    dimension: Dimension
    factor: Fraction

    @property
    def symbol(self) -> str:
        """Canonical text, such as ``nV/sqrt(Hz)``; empty for a plain number."""
        above = "*".join(_written(name, power) for name, power in self.terms if power > 0)
        below = "".join(f"/{_written(name, -power)}" for name, power in self.terms if power < 0)
        return f"{above or '1'}{below}" if below else above

    def __mul__(self, other: Unit) -> Unit:
        """Multiply; equal names cancel: bar * (mV/bar) is mV."""
        powers = dict(self.terms)
        for name, power in other.terms:
            powers[name] = powers.get(name, Fraction(0)) + power
        return _unit(tuple((name, power) for name, power in powers.items() if power))

    def __truediv__(self, other: Unit) -> Unit:
        """Divide, cancelling equal names."""
        return self * other**-1

    def __pow__(self, power: float) -> Unit:
        """Raise to an integer or half power."""
        exponent = Fraction(power)
        return _unit(tuple((name, p * exponent) for name, p in self.terms if exponent))

    def same_kind(self, other: Unit) -> bool:
        """Whether both have the same dimension."""
        return self.dimension == other.dimension

    def factor_to(self, other: Unit) -> float:
        """Factor from this unit to another of the same kind, correctly rounded where it is exact.

        Raises
        ------
        UnitError
            Where the kinds differ, or the factor is beyond double precision; names both.

        """
        if not self.same_kind(other):
            raise UnitError(f"{self.symbol or 'a plain number'} and {other.symbol or 'a plain number'} differ in kind")
        factor = _rounded(self.factor / other.factor)
        if factor == 0.0 or math.isinf(factor):
            raise UnitError(f"{self.symbol} and {other.symbol} are too far apart in size")
        return factor

    def tidy(self) -> Unit:
        """The named coherent unit where a product of several has one (nA*ohm is V), else itself."""
        if len(self.terms) < 2:
            return self
        return next((unit for unit in _coherent() if unit.dimension == self.dimension), self)


DIMENSIONLESS = Unit((), (Fraction(0),) * len(BASE), Fraction(1))
DECIBEL = Unit((("dB", Fraction(1)),), (Fraction(-99),) * len(BASE), Fraction(1))  # of no kind: never converts


@dataclass(frozen=True, slots=True)
class Quantity:
    """A number and its unit; ``unit`` is None for a plain number. ``text`` is what the caller wrote."""

    value: float
    unit: Unit | None
    text: str

    @property
    def is_rejection(self) -> bool:
        """Whether the figure is in dB."""
        return self.unit is DECIBEL


def parse_quantity(text: str) -> Quantity:
    """Read ``"150 uV"``: a number, then a unit; a number alone is a plain number.

    Raises
    ------
    UnitError
        Saying what was found and what would be right.

    """
    if len(text) > LONGEST:
        raise UnitError(f"found {len(text)} characters; a number and a unit take at most {LONGEST}")
    return _parse_quantity(text)


def parse_unit(text: str) -> Unit:
    """Read a unit alone, such as ``"mV/bar"``; ``""`` and ``"1"`` are the plain number's.

    Raises
    ------
    UnitError
        Saying what was found and what would be right.

    """
    if len(text) > LONGEST:
        raise UnitError(f"found {len(text)} characters; a unit takes at most {LONGEST}")
    unit = _parse_unit(text.strip())
    if unit is DECIBEL:
        raise UnitError("found dB; a signal's unit is V, bar, degC or the like")
    return unit


def absolute(quantity: Quantity, unit: Unit) -> float:
    """Give a quantity in ``unit``, temperatures as points on their scales: 298.15 K is 25 degC.

    Raises
    ------
    UnitError
        Where the kinds differ, the figure is in dB, or it is too large in ``unit``.

    """
    written = quantity.unit
    if written is None or written == unit:
        return quantity.value
    if written is DECIBEL:
        raise UnitError(f"found {quantity.text}; a figure in dB has no meaning here")
    here, there = _scale(written), _scale(unit)
    if here is not None and there is not None:
        kelvin = Fraction(repr(quantity.value)) * written.factor + here
        value = _rounded((kelvin - there) / unit.factor)
    elif written.same_kind(unit):
        value = quantity.value * written.factor_to(unit)
    else:
        raise UnitError(f"found {quantity.text}; give it in {unit.symbol or 'a plain number'}")
    if math.isinf(value):
        raise UnitError(f"found {quantity.text}; the number is too large in {unit.symbol or 'a plain number'}")
    return value


def _scale(unit: Unit) -> Fraction | None:
    """Zero of a temperature scale, in kelvin; prefixed kelvins are scales too."""
    if len(unit.terms) == 1 and unit.terms[0][1] == 1 and unit.dimension == _one("K")[1]:
        return ZERO_IN_KELVIN.get(unit.terms[0][0], Fraction(0))
    return None


def _rounded(number: Fraction) -> float:
    """Nearest float, infinite where the number is larger than any."""
    try:
        return float(number)
    except OverflowError:
        return math.inf if number > 0 else -math.inf


# ---------------------------------------------------------------------------------------------
# Parsing


@lru_cache(maxsize=CACHED)
def _parse_quantity(text: str) -> Quantity:
    stripped = text.strip().replace("\u2212", "-")
    number = _NUMBER.match(stripped)
    if stripped.startswith(("±", "+-", "+/-")):
        raise UnitError(f"found {text!r}; write the figure without a plus-minus sign")
    if number is None:
        raise UnitError(f'found {text!r}; write a number and a unit, such as "150 uV"')
    value, rest = float(number.group()), stripped[number.end() :]
    _refuse_odd_sizes(text, value, number.group())
    _refuse_odd_endings(text, rest)
    rest = rest.strip()
    return Quantity(value, _parse_unit(rest) if rest else None, text)


def _refuse_odd_sizes(text: str, value: float, digits: str) -> None:
    if not math.isfinite(value):
        raise UnitError(f"found {text!r}; the number is too large")
    if not value and re.match(r"[^eE]*[1-9]", digits):
        raise UnitError(f"found {text!r}; the number is too small, write 0 or a smaller prefix")


def _refuse_odd_endings(text: str, rest: str) -> None:
    if re.match(r"[,'’]\s*[0-9]|\s[0-9]{3}", rest):
        raise UnitError(f"found {text!r}; write a decimal point, not a comma, and no thousands separators")
    if rest.startswith("_"):
        raise UnitError(f"found {text!r}; write digits without underscores")
    if re.match(r"[A-Za-z][0-9]", rest):
        raise UnitError(f'found {text!r}; write the prefix with the unit, such as "4.7 kohm"')
    if re.search(r"[0-9)]\s*[+-]|\*\*|\+|\s-|-\s*[0-9.]+\s*[A-Za-z]", rest):
        raise UnitError(f"found {text!r}; a number and a unit only, nothing is computed")


@lru_cache(maxsize=CACHED)
def _parse_unit(text: str) -> Unit:
    if text in ("", "1"):
        return DIMENSIONLESS
    if text == "dB":
        return DECIBEL
    plain = text.translate(SPELLINGS)
    terms, place, turn, inside = [], 0, 1, False
    if plain.startswith("1/"):
        place, turn = 2, -1
    while True:
        if turn < 0 and not inside and plain[place : place + 1] == "(":
            inside, place = True, place + 1
        if place == len(plain):
            raise UnitError(f"found {text!r}; a unit is missing at its end")
        factor = _FACTOR.match(plain, place)
        if factor is None:
            raise UnitError(_advice(text, plain, place))
        terms.append((_name(factor["root"] or factor["sign"] or factor["name"], text), _power(factor) * turn))
        place = factor.end()
        if inside and plain[place : place + 1] == ")":
            inside, place = False, place + 1
        if place == len(plain):
            break
        joint = plain[place]
        if joint not in "*/" or (inside and joint == "/") or plain[place : place + 2] == "**":
            raise UnitError(_advice(text, plain, place))
        turn = turn if inside else (-1 if joint == "/" else 1)
        place += 1
    if inside:
        raise UnitError(f"found {text!r}; a closing parenthesis is missing")
    return _product(terms, text)


def _power(factor: re.Match[str]) -> Fraction:
    power = Fraction(factor["power"] or 1)
    power = power if factor["name"] else power / 2
    if not power or not _is_usual(power):
        raise UnitError(f"found {factor.group()!r}; {_USUAL_POWERS}")
    return power


def _is_usual(power: Fraction) -> bool:
    return abs(power) <= HIGHEST_POWER and power.denominator <= 2


def _product(terms: list[tuple[str, Fraction]], text: str) -> Unit:
    unit = DIMENSIONLESS
    for name, power in terms:
        unit = unit * _unit(((name, power),))
    if not all(_is_usual(power) for _, power in unit.terms):
        raise UnitError(f"found {text!r}; {_USUAL_POWERS}")
    if not 1 / LARGEST <= unit.factor <= LARGEST:
        raise UnitError(
            f"found {text!r}; its size is beyond 1e-60 to 1e60 of SI units, write smaller prefixes or powers"
        )
    return unit


def _name(written: str, text: str) -> str:
    """The table's own spelling of a name, prefix included."""
    name = f"{written[:-3]}ohm" if written.endswith("Ohm") else ALIASES.get(written, written)
    if name in TABLE or _split(name) is not None:
        return name
    raise UnitError(_advice(text, written, 0))


def _split(name: str) -> tuple[str, str] | None:
    """Prefix and unit of a name, where it has that form."""
    for length in (2, 1):
        prefix, unit = name[:length], name[length:]
        if prefix in PREFIXES and unit in TABLE and TABLE[unit][2]:
            return prefix, unit
    return None


@cache
def _one(name: str) -> tuple[Fraction, Dimension]:
    """Factor and dimension of one name of the table, prefix included; the table bounds this cache."""
    prefix, unit = ("", name) if name in TABLE else (_split(name) or ("", name))
    factor, exponents, _ = TABLE[unit]
    scale = Fraction(10) ** PREFIXES[prefix] if prefix else Fraction(1)
    return factor * scale, tuple(Fraction(exponents.get(base, 0)) for base in BASE)


@lru_cache(maxsize=CACHED)
def _unit(terms: tuple[tuple[str, Fraction], ...]) -> Unit:
    if not terms:
        return DIMENSIONLESS
    dimension, factor = DIMENSIONLESS.dimension, Fraction(1)
    for name, power in terms:
        one, exponents = _one(name)
        dimension = tuple(d + power * e for d, e in zip(dimension, exponents, strict=True))
        factor *= _to_power(one, power)
    return Unit(tuple(sorted(terms, key=lambda term: term[1] < 0)), dimension, factor)


def _to_power(base: Fraction, power: Fraction) -> Fraction:
    """``base ** power``, exact where that is a rational number; its root is rounded to a float else."""
    if power < 0:
        return 1 / _to_power(base, -power)
    whole = math.floor(power)
    rest = power - whole
    above, below = math.isqrt(base.numerator), math.isqrt(base.denominator)
    if rest == Fraction(1, 2) and above * above == base.numerator and below * below == base.denominator:
        return base**whole * Fraction(above, below)
    return base**whole * Fraction(float(base) ** float(rest))


@cache
def _coherent() -> tuple[Unit, ...]:
    return (DIMENSIONLESS, *(_unit(((name, Fraction(1)),)) for name in COHERENT))


def _written(name: str, power: Fraction) -> str:
    if power == 1:
        return name
    return f"sqrt({name})" if power == Fraction(1, 2) else f"{name}^{float(power):g}"


# ---------------------------------------------------------------------------------------------
# Advice


@cache
def _by_folded_name() -> dict[str, list[str]]:
    """All names, prefixes included, by their lower-case form."""
    prefixed = [prefix + name for name, entry in TABLE.items() if entry[2] for prefix in PREFIXES]
    found: dict[str, list[str]] = {}
    for name in (*TABLE, *prefixed):
        found.setdefault(name.casefold(), []).append(name)
    return found


def _advice(text: str, plain: str, place: int) -> str:
    """Say what in a unit is not understood, and what was likely meant."""
    rest = plain[place:]
    word = "".join(takewhile(lambda letter: letter.isalpha() or letter in "°%", rest))
    if not word:
        found = f"found {text!r}" if text == rest else f"found {text!r}, not understood from {rest!r} on"
        if re.match(r"-?[0-9]", rest) and plain[place - 1 : place].isalpha():
            return f'{found}; write powers with ^, such as "m^2" or "s^-1"'
        spaced = " and without spaces" if rest[0].isspace() else ""
        return f'{found}; write units joined by * or /{spaced}, such as "nV/sqrt(Hz)" or "ppm/K"'
    same = _by_folded_name().get(word.casefold(), [])
    hint = HINTS.get(word) or (None if same else _folded_hints().get(word.casefold()))
    if hint:
        return f"found {word!r} in {text!r}; {hint}"
    near = _nearest_case(word, same) or difflib.get_close_matches(word, TABLE, n=3, cutoff=0.6)
    meant = f"did you mean {', '.join(near[:4])}?" if near else "write a unit's symbol, such as V, bar, degC or ohm"
    return f"unknown unit {word!r} in {text!r}; {meant}"


@cache
def _folded_hints() -> dict[str, str]:
    """Hints by lower-case word; of one letter none, as case is what tells such words apart."""
    return {word.casefold(): hint for word, hint in HINTS.items() if len(word) > 1}


def _nearest_case(word: str, names: list[str]) -> list[str]:
    """Names that differ from the word in case alone, those with the fewest such letters first."""
    return sorted(names, key=lambda name: sum(a != b for a, b in zip(name, word, strict=False)))
