"""The table of units, every entry: against pint and against the SI brochure.

SI brochure: BIPM, The International System of Units, 9th edition (2019), tables 2 to 8, values from memory.
pint, a general-purpose units library, is an oracle here and nothing else; request text never reaches it.
"""

from __future__ import annotations

import math
from fractions import Fraction

import pint
import pytest
from stagesum_schemas.unit_table import BASE, COHERENT, PREFIXES, TABLE
from stagesum_schemas.units import DIMENSIONLESS, UnitError, parse_unit

PINT: pint.UnitRegistry = pint.UnitRegistry()


def dimension(**exponents: float) -> tuple[Fraction, ...]:
    """Exponents over our base dimensions, from those that are not zero."""
    return tuple(Fraction(exponents.get(base, 0)) for base in BASE)


# ---------------------------------------------------------------------------------------------
# The table against pint

PINT_NAMES = {
    "m": "meter", "g": "gram", "s": "second", "A": "ampere", "K": "kelvin", "mol": "mole", "cd": "candela",
    "rad": "radian", "sr": "steradian", "Hz": "hertz", "N": "newton", "Pa": "pascal", "J": "joule", "W": "watt",
    "C": "coulomb", "V": "volt", "F": "farad", "ohm": "ohm", "S": "siemens", "Wb": "weber", "T": "tesla",
    "H": "henry", "lm": "lumen", "lx": "lux", "Bq": "becquerel", "Gy": "gray", "Sv": "sievert", "kat": "katal",
    "min": "minute", "h": "hour", "kh": "kilohour", "d": "day", "L": "liter", "l": "liter", "t": "metric_ton",
    "eV": "electron_volt", "deg": "degree", "arcmin": "arcminute", "arcsec": "arcsecond", "bar": "bar",
    "atm": "standard_atmosphere", "Torr": "torr", "mmHg": "millimeter_Hg", "inHg": "inch_Hg",
    "psi": "pound_force_per_square_inch", "kgf": "kilogram_force", "lbf": "pound_force", "gn": "standard_gravity",
    "lb": "pound", "oz": "ounce", "in": "inch", "ft": "foot", "mil": "thou", "yr": "julian_year",
    "rpm": "revolutions_per_minute", "Wh": "watt_hour", "Ah": "ampere_hour", "degC": "delta_degree_Celsius",
    "degF": "delta_degree_Fahrenheit", "%": "percent", "ppm": "ppm",
}  # fmt: skip
NOT_IN_PINT = {
    "count": "a base dimension of ours, so that codes are no ratio; pint's is dimensionless",
    "G": "pint's gauss is the one of the Gaussian system, with other dimensions",
    "ppb": "pint has no such unit",
}
PINT_BASE = dict(
    zip(
        ("meter", "kilogram", "second", "ampere", "kelvin", "mole", "candela"),
        ("m", "kg", "s", "A", "K", "mol", "cd"),
        strict=True,
    )
)
NO_DIMENSION = ("radian", "steradian", "count")  # as in the SI; a becquerel is one count a second to pint
PINT_PREFIXES = {
    "Q": "quetta", "R": "ronna", "Y": "yotta", "Z": "zetta", "E": "exa", "P": "peta", "T": "tera", "G": "giga",
    "M": "mega", "k": "kilo", "h": "hecto", "da": "deca", "d": "deci", "c": "centi", "m": "milli", "u": "micro",
    "n": "nano", "p": "pico", "f": "femto", "a": "atto", "z": "zepto", "y": "yocto", "r": "ronto", "q": "quecto",
}  # fmt: skip


def by_pint(name: str) -> tuple[float, tuple[Fraction, ...]]:
    """Factor to coherent SI and dimension as pint has them."""
    size = PINT.Quantity(1.0, name).to_base_units()
    exponents = {PINT_BASE[unit]: power for unit, power in size.unit_items() if unit not in NO_DIMENSION}
    return size.magnitude, dimension(**exponents)


def test_every_name_of_the_table_is_checked_against_pint_or_says_why_not():
    assert set(PINT_NAMES) | set(NOT_IN_PINT) == set(TABLE)
    assert set(PINT_PREFIXES) == set(PREFIXES)


@pytest.mark.parametrize("name", PINT_NAMES)
def test_factor_and_dimension_are_those_of_pint(name):
    factor, exponents = by_pint(PINT_NAMES[name])
    if name == "rpm":  # pint counts the angle, 2 pi a turn; ours is a rotational frequency, turns over time
        factor /= 2 * math.pi
    unit = parse_unit(name)
    assert float(unit.factor) == pytest.approx(factor, rel=2e-15)
    assert unit.dimension == exponents


@pytest.mark.parametrize("prefix", PREFIXES)
def test_prefixes_are_those_of_pint(prefix):
    factor, _ = by_pint(f"{PINT_PREFIXES[prefix]}volt")
    assert float(parse_unit(f"{prefix}V").factor) == pytest.approx(factor, rel=2e-15)


@pytest.mark.parametrize("name", [name for name, entry in TABLE.items() if entry[2]])
def test_every_prefix_stands_before_a_unit_that_takes_one(name):
    for prefix, power in PREFIXES.items():
        if prefix + name not in TABLE:
            unit = parse_unit(prefix + name)
            assert (unit.factor, unit.dimension) == (TABLE[name][0] * Fraction(10) ** power, parse_unit(name).dimension)


@pytest.mark.parametrize("name", [name for name, entry in TABLE.items() if not entry[2]])
def test_no_prefix_stands_before_a_unit_that_takes_none(name):
    for prefix in PREFIXES:
        if prefix + name not in TABLE:
            with pytest.raises(UnitError):
                parse_unit(prefix + name)


# ---------------------------------------------------------------------------------------------
# The table against the SI brochure

SI_BASE = {"m": "m", "kg": "kg", "s": "s", "A": "A", "K": "K", "mol": "mol", "cd": "cd"}  # table 2
SI_DERIVED = {  # tables 4 and 5 and the expressions in base units there: all have the factor 1
    "rad": {}, "sr": {}, "Hz": {"s": -1}, "N": {"kg": 1, "m": 1, "s": -2}, "Pa": {"kg": 1, "m": -1, "s": -2},
    "J": {"kg": 1, "m": 2, "s": -2}, "W": {"kg": 1, "m": 2, "s": -3}, "C": {"A": 1, "s": 1},
    "V": {"kg": 1, "m": 2, "s": -3, "A": -1}, "F": {"kg": -1, "m": -2, "s": 4, "A": 2},
    "ohm": {"kg": 1, "m": 2, "s": -3, "A": -2}, "S": {"kg": -1, "m": -2, "s": 3, "A": 2},
    "Wb": {"kg": 1, "m": 2, "s": -2, "A": -1}, "T": {"kg": 1, "s": -2, "A": -1},
    "H": {"kg": 1, "m": 2, "s": -2, "A": -2}, "degC": {"K": 1}, "lm": {"cd": 1}, "lx": {"cd": 1, "m": -2},
    "Bq": {"s": -1}, "Gy": {"m": 2, "s": -2}, "Sv": {"m": 2, "s": -2}, "kat": {"mol": 1, "s": -1},
}  # fmt: skip
SI_RELATIONS = {  # table 4, third column: a unit in terms of others
    "N": "kg*m/s^2", "Pa": "N/m^2", "J": "N*m", "W": "J/s", "C": "A*s", "V": "W/A", "F": "C/V", "ohm": "V/A",
    "S": "A/V", "Wb": "V*s", "T": "Wb/m^2", "H": "Wb/A", "lx": "lm/m^2", "Gy": "J/kg", "Sv": "J/kg", "kat": "mol/s",
}  # fmt: skip
SI_PREFIXES = {  # table 7, with the four prefixes of resolution 3 of the 27th CGPM (2022)
    "da": "1e1", "h": "1e2", "k": "1e3", "M": "1e6", "G": "1e9", "T": "1e12", "P": "1e15", "E": "1e18", "Z": "1e21",
    "Y": "1e24", "R": "1e27", "Q": "1e30", "d": "1e-1", "c": "1e-2", "m": "1e-3", "u": "1e-6", "n": "1e-9",
    "p": "1e-12", "f": "1e-15", "a": "1e-18", "z": "1e-21", "y": "1e-24", "r": "1e-27", "q": "1e-30",
}  # fmt: skip
ACCEPTED = {  # table 8: unit, value in SI units
    "min": ("60", "s"), "h": ("3600", "s"), "d": ("86400", "s"), "L": ("1e-3", "m^3"), "l": ("1e-3", "m^3"),
    "t": ("1000", "kg"), "eV": ("1.602176634e-19", "J"),
}  # fmt: skip
ENGINEERS = {  # exact by definition; from memory
    "bar": ("1e5", "Pa"), "atm": ("101325", "Pa"), "mmHg": ("133.322387415", "Pa"), "kgf": ("9.80665", "N"),
    "gn": ("9.80665", "m/s^2"), "lb": ("0.45359237", "kg"), "oz": ("0.028349523125", "kg"), "in": ("0.0254", "m"),
    "ft": ("0.3048", "m"), "mil": ("2.54e-5", "m"), "lbf": ("4.4482216152605", "N"), "G": ("1e-4", "T"),
    "yr": ("31557600", "s"), "Wh": ("3600", "J"), "Ah": ("3600", "C"), "kh": ("3600000", "s"),
    "%": ("1e-2", ""), "ppm": ("1e-6", ""), "ppb": ("1e-9", ""),
}  # fmt: skip


@pytest.mark.parametrize("name", SI_BASE)
def test_base_units_are_the_base_dimensions(name):
    unit = parse_unit(name)
    assert (unit.factor, unit.dimension) == (1, dimension(**{SI_BASE[name]: 1}))


@pytest.mark.parametrize("name", SI_DERIVED)
def test_named_derived_units_are_coherent(name):
    unit = parse_unit(name)
    assert (unit.factor, unit.dimension) == (1, dimension(**SI_DERIVED[name]))


@pytest.mark.parametrize("name", SI_RELATIONS)
def test_named_derived_units_are_what_the_brochure_says_in_terms_of_others(name):
    assert parse_unit(SI_RELATIONS[name]).factor_to(parse_unit(name)) == 1.0


@pytest.mark.parametrize("prefix", SI_PREFIXES)
def test_prefixes_are_those_of_the_brochure(prefix):
    assert parse_unit(f"{prefix}V").factor == Fraction(SI_PREFIXES[prefix])
    assert set(SI_PREFIXES) == set(PREFIXES)


@pytest.mark.parametrize(("name", "told"), (ACCEPTED | ENGINEERS).items())
def test_other_units_have_their_defined_value(name, told):
    value, unit = told
    assert parse_unit(name).factor == Fraction(value) * parse_unit(unit).factor
    assert parse_unit(name).same_kind(parse_unit(unit))


@pytest.mark.parametrize(("name", "turns"), [("deg", 360), ("arcmin", 21_600), ("arcsec", 1_296_000)])
def test_angles_are_parts_of_a_turn(name, turns):
    """Table 8: 1 degree is pi/180 rad, a minute a sixtieth of it, a second a sixtieth of that."""
    assert float(parse_unit(name).factor) == pytest.approx(2 * math.pi / turns, rel=3e-16)


def test_a_torr_is_a_760th_of_an_atmosphere():
    assert 760 * parse_unit("Torr").factor == parse_unit("atm").factor


def test_a_psi_is_a_pound_force_on_a_square_inch():
    assert parse_unit("lbf/in^2").factor == parse_unit("psi").factor
    assert float(parse_unit("psi").factor) == pytest.approx(6894.757293168361, rel=1e-15)


def test_count_is_a_dimension_of_its_own():
    assert parse_unit("count").dimension == dimension(count=1)
    assert not parse_unit("count").same_kind(DIMENSIONLESS)


def test_named_coherent_units_are_coherent_and_differ_in_kind():
    found = [parse_unit(name) for name in COHERENT]
    assert {unit.factor for unit in found} == {1}
    assert len({unit.dimension for unit in found}) == len(found)
