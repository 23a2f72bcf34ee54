"""Units and quantities: what is read, what is refused and in what words, factors, algebra and temperatures."""

from __future__ import annotations

import math
import time
from fractions import Fraction

import pytest
from hypothesis import assume, example, given
from hypothesis import strategies as st
from stagesum_schemas import units
from stagesum_schemas.unit_table import ALIASES, BASE, HINTS, PREFIXES, TABLE
from stagesum_schemas.units import DECIBEL, DIMENSIONLESS, UnitError, absolute, parse_quantity, parse_unit


def refused(text: str) -> str:
    with pytest.raises(UnitError) as caught:
        parse_quantity(text)
    return str(caught.value)


def in_unit(text: str, unit: str) -> float:
    return absolute(parse_quantity(text), parse_unit(unit))


# ---------------------------------------------------------------------------------------------
# What is refused, and in what words

REFUSED = [
    ("9**9**8", "found '9**9**8'; a number and a unit only, nothing is computed"),
    ("a" * 100_000, "found 100000 characters; a number and a unit take at most 64"),
    ("1" * 100_000, "found 100000 characters; a number and a unit take at most 64"),
    ("1,5 mV", "found '1,5 mV'; write a decimal point, not a comma, and no thousands separators"),
    ("1,500.0 mV", "found '1,500.0 mV'; write a decimal point, not a comma, and no thousands separators"),
    ("k", "found 'k'; write a number and a unit, such as \"150 uV\""),
    ("10 k", "found 'k' in 'k'; a prefix needs its unit, such as kohm"),
    ("2 M", "found 'M' in 'M'; a prefix needs its unit, such as Mohm"),
    ("Nm", "found 'Nm'; write a number and a unit, such as \"150 uV\""),
    ("3 Nm", "found 'Nm' in 'Nm'; write N*m"),
    ("5 V + 3 V", "found '5 V + 3 V'; a number and a unit only, nothing is computed"),
    ("5 V-3 V", "found '5 V-3 V'; a number and a unit only, nothing is computed"),
    ("5-3 V", "found '5-3 V'; a number and a unit only, nothing is computed"),
    ("inf V", "found 'inf V'; write a number and a unit, such as \"150 uV\""),
    ("nan V", "found 'nan V'; write a number and a unit, such as \"150 uV\""),
    ("1e999 V", "found '1e999 V'; the number is too large"),
    ("1_000 uV", "found '1_000 uV'; write digits without underscores"),
    ("4k7", "found '4k7'; write the prefix with the unit, such as \"4.7 kohm\""),
    ("4k7 ohm", "found '4k7 ohm'; write the prefix with the unit, such as \"4.7 kohm\""),
    ("2 Vpp", "found 'Vpp' in 'Vpp'; give an amplitude or a standard deviation in V; peak-to-peak is not a unit"),
    ("2 Vrms", "found 'Vrms' in 'Vrms'; write V; a standard deviation stands in typ"),
    ("10 nV/rtHz", "found 'rtHz' in 'nV/rtHz'; write sqrt(Hz)"),
    ("3 mv", "unknown unit 'mv' in 'mv'; did you mean mV, MV?"),
    ("3 Kohm", "unknown unit 'Kohm' in 'Kohm'; did you mean kohm?"),
    ("3 KOHM", "unknown unit 'KOHM' in 'KOHM'; did you mean kohm?"),
    ("3 BAR", "unknown unit 'BAR' in 'BAR'; did you mean bar?"),
    ("3 mV/Bar", "unknown unit 'Bar' in 'mV/Bar'; did you mean bar?"),
    ("3 volts", "unknown unit 'volts' in 'volts'; write a unit's symbol, such as V, bar, degC or ohm"),
    ("5 lsb", "found 'lsb' in 'lsb'; write the step in V, or count"),
    ("5 P", "unknown unit 'P' in 'P'; did you mean Pa?"),  # peta, so no hint about pico
    ("90 db", "found 'db' in 'db'; a figure in dB stands alone, such as 90 dB"),
    ("±5 V", "found '±5 V'; write the figure without a plus-minus sign"),
    ("+/-5 V", "found '+/-5 V'; write the figure without a plus-minus sign"),
    ("1'000 V", 'found "1\'000 V"; write a decimal point, not a comma, and no thousands separators'),
    ("1 000 V", "found '1 000 V'; write a decimal point, not a comma, and no thousands separators"),
    ("1e-400 V", "found '1e-400 V'; the number is too small, write 0 or a smaller prefix"),
    ("5 V - 3", "found '5 V - 3'; a number and a unit only, nothing is computed"),
    ("5 V+3", "found '5 V+3'; a number and a unit only, nothing is computed"),
    ("1 m3", "found 'm3', not understood from '3' on; write powers with ^, such as \"m^2\" or \"s^-1\""),
    ("1 s-1", "found 's-1', not understood from '-1' on; write powers with ^, such as \"m^2\" or \"s^-1\""),
    ("1 V / s", "found 'V / s', not understood from ' / s' on; write units joined by * or / and without spaces, "),
    ("1 dB/K", "found 'dB' in 'dB/K'; a figure in dB stands alone, such as 90 dB"),
    ("", "found ''; write a number and a unit, such as \"150 uV\""),
    ("\u0663 V", "found '\u0663 V'; write a number and a unit, such as \"150 uV\""),
    ("5 V/(A*s", "found 'V/(A*s'; a closing parenthesis is missing"),
    ("5 V*", "found 'V*'; a unit is missing at its end"),
    ("5 V/", "found 'V/'; a unit is missing at its end"),
    ("5 V**2", "found '5 V**2'; a number and a unit only, nothing is computed"),
    ("5 V^0", "found 'V^0'; powers go from 0.5 to 6 in steps of 0.5"),
    ("5 V^7", "found 'V^7'; powers go from 0.5 to 6 in steps of 0.5"),
    ("5 V^999999999", "found 'V^999999999'; powers go from 0.5 to 6 in steps of 0.5"),
    ("5 V^0.25", "found 'V^0.25'; powers go from 0.5 to 6 in steps of 0.5"),
    ("5 sqrt(cm)^0.5", "found 'sqrt(cm)^0.5'; powers go from 0.5 to 6 in steps of 0.5"),
    ("5 m^6*m^6", "found 'm^6*m^6'; powers go from 0.5 to 6 in steps of 0.5"),
    (
        "5 Qm^6/qm^6",
        "found 'Qm^6/qm^6'; its size is beyond 1e-60 to 1e60 of SI units, write smaller prefixes or powers",
    ),
    ("5 V V", "found 'V V', not understood from ' V' on; "),
    ("5 V)", "found 'V)', not understood from ')' on; "),
    ("5 V/(m/s)", "found 'V/(m/s)', not understood from '/s)' on; "),
    ("5 (V)", 'found \'(V)\'; write units joined by * or /, such as "nV/sqrt(Hz)" or "ppm/K"'),
]


@pytest.mark.parametrize(("text", "words"), REFUSED, ids=[text[:20] for text, _ in REFUSED])
def test_what_is_no_quantity_is_refused_with_what_would_be_right(text, words):
    start = time.perf_counter()
    message = refused(text)
    assert message.startswith(words) if words.endswith(" ") else message == words
    assert time.perf_counter() - start < 0.5  # nothing is computed, however long the text


@pytest.mark.parametrize("word", HINTS)
def test_every_hint_is_given(word):
    assert HINTS[word] in refused(f"5 V/{word}")


@pytest.mark.parametrize("text", ["a" * 65, "1" * 100_000])
def test_a_unit_that_is_too_long_is_refused(text):
    with pytest.raises(UnitError, match=f"found {len(text)} characters; a unit takes at most 64"):
        parse_unit(text)


def test_64_characters_are_read_and_65_are_not():
    assert parse_quantity("0" * 62 + " V").value == 0.0
    assert "65 characters" in refused("0" * 63 + " V")


def test_a_signal_is_not_in_db():
    with pytest.raises(UnitError, match="found dB; a signal's unit is V, bar, degC or the like"):
        parse_unit("dB")


# ---------------------------------------------------------------------------------------------
# What is read


def test_a_root_of_hertz_is_one_in_every_spelling():
    read = [parse_quantity(f"10 nV/{root}").unit for root in ("√Hz", "√(Hz)", "sqrt(Hz)", "Hz^0.5")]
    assert read[0] is not None
    assert read == [read[0]] * 4
    assert read[0].symbol == "nV/sqrt(Hz)"
    assert read[0].dimension == tuple(
        volt - Fraction(hertz, 2)
        for volt, hertz in zip(parse_unit("V").dimension, parse_unit("Hz").dimension, strict=True)
    )


def test_drift_by_degree_celsius_is_drift_by_kelvin():
    """A temperature in a compound unit is a difference: no offset of 273.15 comes in."""
    assert parse_unit("uV/degC").factor_to(parse_unit("uV/K")) == 1.0
    assert parse_unit("uV/degF").factor_to(parse_unit("uV/K")) == 1.8


def test_decibels_stay_decibels():
    quantity = parse_quantity("80 dB")
    assert (quantity.value, quantity.is_rejection) == (80.0, True)
    assert not DECIBEL.same_kind(DIMENSIONLESS)
    with pytest.raises(UnitError, match="found 80 dB; a figure in dB has no meaning here"):
        absolute(quantity, parse_unit("V"))


def test_a_plain_number_has_no_unit():
    quantity = parse_quantity(" 2.5e-3 ")
    assert (quantity.value, quantity.unit, quantity.is_rejection) == (0.0025, None, False)
    assert absolute(quantity, parse_unit("degC")) == 0.0025


@pytest.mark.parametrize(
    ("text", "symbol"),
    [
        ("1 \u00b5V", "uV"),
        ("1 \u03bcV", "uV"),
        ("1 k\u03a9", "kohm"),
        ("1 k\u2126", "kohm"),
        ("1 N·m", "N*m"),
        ("1 m²", "m^2"),
        ("1 ppm/°C", "ppm/degC"),
        ("1V", "V"),
        ("1 1/s", "1/s"),
        ("1 V/(m*s)", "V/m/s"),
        ("1 V/m/s", "V/m/s"),
        ("1 V/m*s", "V*s/m"),
        ("1 V^-1", "1/V"),
        ("1 counts", "count"),
        ("1 Ohm", "ohm"),
        ("1 kOhm", "kohm"),
        ("1 N\u22c5m", "N*m"),
        ("1 \u00baC", "degC"),
        ("1 \u2103", "degC"),
        ("1 \u2109", "degF"),
        ("1 ppm/a", "ppm/yr"),
        ("1 uV/day", "uV/d"),
    ],
)
def test_spellings_have_one_symbol(text, symbol):
    unit = parse_quantity(text).unit
    assert unit is not None
    assert (unit.symbol, parse_unit(symbol)) == (symbol, unit)


@pytest.mark.parametrize("written", ALIASES)
def test_other_names_of_a_unit_are_that_unit(written):
    if written == "°":
        assert parse_quantity("5 °").unit == parse_unit("deg")
    assert parse_unit(written) == parse_unit(ALIASES[written])


@pytest.mark.parametrize("text", ["-5 V", "\u22125 V"])
def test_both_minus_signs_are_read(text):
    assert parse_quantity(text).value == -5.0


@pytest.mark.parametrize(
    ("name", "base"), [("min", "s"), ("cd", "cd"), ("Pa", "Pa"), ("kh", "s"), ("ft", "m"), ("mmol", "mol")]
)
def test_a_name_of_the_table_wins_over_a_prefix_and_a_name(name, base):
    assert parse_unit(name).same_kind(parse_unit(base))


# ---------------------------------------------------------------------------------------------
# Any text at all

PIECES = st.sampled_from(
    [
        "1",
        "9",
        ".",
        "e",
        "-",
        "+",
        "*",
        "/",
        "^",
        "(",
        ")",
        "√",
        "sqrt(",
        " ",
        "0.5",
        "k",
        "V",
        "Hz",
        "µ",
        "°",
        "%",
        "m",
    ]
)


@pytest.mark.parametrize("parse", [parse_quantity, parse_unit])
@given(text=st.text(max_size=80) | st.lists(PIECES, max_size=30).map("".join))
@example(text="1 V/(")
@example(text="1 \ud800")
@example(text="V^-")
def test_any_text_is_read_or_refused_by_a_unit_error(parse, text):
    try:
        parsed = parse(text)
    except UnitError:
        return
    unit = getattr(parsed, "unit", parsed)
    if unit is not None and unit is not DECIBEL:
        assert parse_unit(unit.symbol) == unit
        assert 1e-60 <= unit.factor <= 1e60


NAMES = st.sampled_from([name for name in TABLE if name != "%"])
POWERS = st.sampled_from([Fraction(n, 2) for n in range(1, 13)])


@st.composite
def named(draw: st.DrawFn) -> tuple[str, float, str]:
    """A name with its prefix: text, factor and the bare name."""
    name = draw(NAMES)
    prefix = draw(st.sampled_from(["", *PREFIXES])) if TABLE[name][2] else ""
    assume(not prefix or prefix + name not in TABLE)
    return prefix + name, float(TABLE[name][0]) * 10.0 ** PREFIXES.get(prefix, 0), name


@given(
    number=st.floats(allow_nan=False, allow_infinity=False), one=named(), power=POWERS, gap=st.sampled_from(["", " "])
)
def test_a_valid_quantity_comes_back_whole(number, one, power, gap):
    text, factor, name = one
    expected = float(power) * math.log10(factor)
    written = f"{number!r}{gap or ' '}{text}^{float(power):g}"
    assume(len(written) <= units.LONGEST)
    if abs(expected) > 60.001:
        assert "its size is beyond" in refused(written)
        return
    assume(abs(expected) < 59.999)
    quantity = parse_quantity(written)
    assert (quantity.value, quantity.text) == (number, written)
    assert quantity.unit is not None
    assert quantity.unit.dimension == tuple(power * TABLE[name][1].get(base, 0) for base in BASE)
    assert math.log10(quantity.unit.factor) == pytest.approx(expected, abs=1e-12)
    assert parse_unit(quantity.unit.symbol) == quantity.unit


@given(first=named(), second=named(), joint=st.sampled_from("*/"), power=POWERS)
def test_a_product_of_two_is_the_product_of_their_units(first, second, joint, power):
    assume(first[0] != second[0])
    text = f"{first[0]}{joint}{second[0]}^{float(power):g}"
    left, right = parse_unit(first[0]), parse_unit(second[0]) ** power
    made = left * right if joint == "*" else left / right
    assume(1e-60 < made.factor < 1e60)
    assert parse_unit(text) == made
    assert parse_unit(made.symbol) == made
    assert made.factor == (left.factor * right.factor if joint == "*" else left.factor / right.factor)


# ---------------------------------------------------------------------------------------------
# Factors and algebra


@pytest.mark.parametrize(
    ("here", "there", "factor"),
    [
        ("uV", "mV", 0.001),
        ("mV", "uV", 1000.0),
        ("nV", "mV", 1e-6),
        ("kPa", "bar", 0.01),
        ("ppm", "%", 0.0001),
        ("%", "", 0.01),
        ("h", "min", 60.0),
        ("nV/sqrt(kHz)", "nV/sqrt(kHz)", 1.0),
        ("nV/sqrt(MHz)", "pV/sqrt(Hz)", 1.0),
        ("cm^0.5", "m^0.5", 0.1),
        ("V*s/m", "s*V/m", 1.0),
    ],
)
def test_factors_are_correctly_rounded(here, there, factor):
    """0.001 to the last bit, where 1e-6 / 1e-3 in floats is 0.001 only by luck and 1e-9 / 1e-3 is not 1e-6."""
    assert parse_unit(here).factor_to(parse_unit(there)) == factor


def test_a_root_that_is_no_fraction_is_rounded_only():
    assert parse_unit("sqrt(kHz)").factor_to(parse_unit("sqrt(Hz)")) == math.sqrt(1000.0)
    assert (parse_unit("sqrt(kHz)") ** 0.5).factor == pytest.approx(1000**0.25, rel=1e-15)
    assert (parse_unit("sqrt(cm)") ** 0.5).factor == pytest.approx(0.01**0.25, rel=1e-15)


@pytest.mark.parametrize(
    ("here", "there"), [("V", "bar"), ("nV/Hz", "nV/sqrt(Hz)"), ("count", "ppm"), ("V", ""), ("degC", "V")]
)
def test_a_refused_kind_names_both_units(here, there):
    words = f"{here} and {there or 'a plain number'} differ in kind"
    assert not parse_unit(here).same_kind(parse_unit(there))
    with pytest.raises(UnitError) as caught:
        parse_unit(here).factor_to(parse_unit(there))
    assert str(caught.value) == words


def test_units_too_far_apart_are_refused_by_name():
    """Products made after parsing may be of any size; their factor to each other may be no float."""
    huge, small = parse_unit("Qm") ** 6, parse_unit("qm") ** 6
    for here, there in ((huge, small), (small, huge)):
        with pytest.raises(UnitError, match=r"Qm\^6.*too far apart in size|qm\^6.*too far apart in size"):
            here.factor_to(there)


@pytest.mark.parametrize(
    ("first", "second", "symbol"),
    [
        ("bar", "mV/bar", "mV"),
        ("mV", "V/V", "mV"),
        ("mV", "", "mV"),
        ("nV/sqrt(Hz)", "sqrt(Hz)", "nV"),
        ("uV/K", "K", "uV"),
        ("V", "1/V", ""),
        ("K", "ppm/K", "ppm"),
    ],
)
def test_equal_names_cancel(first, second, symbol):
    assert (parse_unit(first) * parse_unit(second)).symbol == symbol


def test_division_and_powers_undo_products():
    volt, kelvin = parse_unit("mV"), parse_unit("K")
    assert (volt * kelvin) / kelvin == volt
    assert (volt**2) ** 0.5 == volt
    assert volt**0 == DIMENSIONLESS
    assert volt / volt == DIMENSIONLESS


@pytest.mark.parametrize(
    ("text", "symbol"),
    [
        ("nA*ohm", "V"),
        ("mV/ohm", "A"),
        ("kPa*m^2", "N"),
        ("V*V/ohm", "W"),
        ("uV/V", ""),
        ("V/bar", "V/bar"),
        ("mV", "mV"),
        ("count*V/V", "count"),
    ],
)
def test_a_product_is_told_by_its_named_unit_where_it_has_one(text, symbol):
    unit = parse_unit(text)
    assert unit.tidy().symbol == symbol
    assert unit.factor_to(unit.tidy()) == float(unit.factor / unit.tidy().factor)


def test_a_bias_current_through_a_resistor_is_a_voltage():
    made = parse_unit("nA") * parse_unit("ohm")
    assert made.factor_to(made.tidy()) == 1e-9
    assert made.factor_to(parse_unit("uV")) == 0.001


# ---------------------------------------------------------------------------------------------
# Temperatures


@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("298.15 K", "degC", 25.0),
        ("77 degF", "degC", 25.0),
        ("25 degC", "degC", 25.0),
        ("25 °C", "degC", 25.0),
        ("25 degC", "K", 298.15),
        ("25 degC", "degF", 77.0),
        ("-40 degC", "degF", -40.0),
        ("-40 degF", "degC", -40.0),
        ("0 K", "degC", -273.15),
        ("0 K", "degF", -459.67),
        ("212 degF", "degC", 100.0),
        ("298150 mK", "degC", 25.0),
        ("25 degC", "mK", 298150.0),
        ("5 V", "mV", 5000.0),
    ],
)
def test_absolute_temperatures_are_points_on_their_scales(text, unit, value):
    """Fixed points of the scales: t/degC = T/K - 273.15 (SI brochure, 2.3.1); water boils at 212 degF."""
    assert in_unit(text, unit) == value


@given(st.floats(-273.15, 1e6), st.sampled_from(["K", "degF", "mK"]))
def test_temperatures_come_back_from_another_scale(celsius, scale):
    there = absolute(parse_quantity(f"{celsius!r} degC"), parse_unit(scale))
    assert in_unit(f"{there!r} {scale}", "degC") == pytest.approx(celsius, abs=1e-9, rel=1e-13)


@pytest.mark.parametrize(
    ("text", "unit"), [("1.7e308 K", "degF"), ("-1.7e308 K", "degF"), ("1.7e308 degC", "degF"), ("1e308 V", "uV")]
)
def test_a_number_too_large_in_another_unit_is_refused(text, unit):
    with pytest.raises(UnitError) as caught:
        in_unit(text, unit)
    assert str(caught.value) == f"found {text}; the number is too large in {unit}"


@pytest.mark.parametrize(
    ("text", "unit", "right"),
    [("5 V", "degC", "degC"), ("5 V", "bar", "bar"), ("25 degC", "V", "V"), ("5 V", "", "a plain number")],
)
def test_a_quantity_of_another_kind_is_refused_with_both_units(text, unit, right):
    with pytest.raises(UnitError) as caught:
        in_unit(text, unit)
    assert str(caught.value) == f"found {text}; give it in {right}"
