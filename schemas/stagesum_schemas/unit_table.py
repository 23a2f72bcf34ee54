"""The closed table of unit names: exact factors to coherent SI, exponents of the base dimensions.

SI units and prefixes: SI brochure, 9th edition, tables 2 to 8. ``count`` is a base dimension of its own, so that a
converter's codes can't be taken for a ratio. ``degC`` and ``degF`` are temperature differences here; absolute
temperatures are read by ``units.absolute``.
"""

from __future__ import annotations

import math
from fractions import Fraction

BASE = ("m", "kg", "s", "A", "K", "mol", "cd", "count")

PREFIXES = {
    "Q": 30, "R": 27, "Y": 24, "Z": 21, "E": 18, "P": 15, "T": 12, "G": 9, "M": 6, "k": 3, "h": 2, "da": 1,
    "d": -1, "c": -2, "m": -3, "u": -6, "n": -9, "p": -12, "f": -15, "a": -18, "z": -21, "y": -24, "r": -27, "q": -30,
}  # fmt: skip

INCH = Fraction(254, 10_000)
POUND = Fraction("0.45359237")
GRAVITY = Fraction("9.80665")  # standard acceleration of free fall, m/s^2
MERCURY = Fraction("133.322387415")  # conventional millimetre of mercury, Pa
HOUR, DAY = 3600, 86_400

# name: (factor, dimensions as {base: exponent}, takes SI prefixes)
_Entry = tuple[Fraction, dict[str, int], bool]


def _si(**dimensions: int) -> _Entry:
    return Fraction(1), dimensions, True


def _fixed(factor: Fraction | int | str, **dimensions: int) -> _Entry:
    return Fraction(factor), dimensions, False


_PRESSURE = {"kg": 1, "m": -1, "s": -2}
_FORCE = {"kg": 1, "m": 1, "s": -2}
_ENERGY = {"kg": 1, "m": 2, "s": -2}

TABLE: dict[str, _Entry] = {
    # SI base and named derived units
    "m": _si(m=1),
    "g": (Fraction(1, 1000), {"kg": 1}, True),
    "s": _si(s=1),
    "A": _si(A=1),
    "K": _si(K=1),
    "mol": _si(mol=1),
    "cd": _si(cd=1),
    "rad": _si(),
    "sr": _si(),
    "Hz": _si(s=-1),
    "N": _si(**_FORCE),
    "Pa": _si(**_PRESSURE),
    "J": _si(**_ENERGY),
    "W": _si(kg=1, m=2, s=-3),
    "C": _si(A=1, s=1),
    "V": _si(kg=1, m=2, s=-3, A=-1),
    "F": _si(kg=-1, m=-2, s=4, A=2),
    "ohm": _si(kg=1, m=2, s=-3, A=-2),
    "S": _si(kg=-1, m=-2, s=3, A=2),
    "Wb": _si(kg=1, m=2, s=-2, A=-1),
    "T": _si(kg=1, s=-2, A=-1),
    "H": _si(kg=1, m=2, s=-2, A=-2),
    "lm": _si(cd=1),
    "lx": _si(cd=1, m=-2),
    "Bq": _si(s=-1),
    "Gy": _si(m=2, s=-2),
    "Sv": _si(m=2, s=-2),
    "kat": _si(mol=1, s=-1),
    # accepted for use with the SI
    "min": _fixed(60, s=1),
    "h": _fixed(HOUR, s=1),
    "kh": _fixed(1000 * HOUR, s=1),
    "d": _fixed(DAY, s=1),
    "L": (Fraction(1, 1000), {"m": 3}, True),
    "l": (Fraction(1, 1000), {"m": 3}, True),
    "t": (Fraction(1000), {"kg": 1}, False),
    "eV": (Fraction("1.602176634e-19"), _ENERGY, True),
    "deg": _fixed(Fraction(math.pi / 180)),
    "arcmin": _fixed(Fraction(math.pi / 10_800)),
    "arcsec": _fixed(Fraction(math.pi / 648_000)),
    # units engineers measure in
    "bar": (Fraction(100_000), _PRESSURE, True),
    "atm": _fixed(101_325, **_PRESSURE),
    "Torr": _fixed(Fraction(101_325, 760), **_PRESSURE),
    "mmHg": _fixed(MERCURY, **_PRESSURE),
    "inHg": _fixed(MERCURY * Fraction("25.4"), **_PRESSURE),
    "psi": _fixed(POUND * GRAVITY / INCH**2, **_PRESSURE),
    "kgf": _fixed(GRAVITY, **_FORCE),
    "lbf": _fixed(POUND * GRAVITY, **_FORCE),
    "gn": _fixed(GRAVITY, m=1, s=-2),
    "lb": _fixed(POUND, kg=1),
    "oz": _fixed(POUND / 16, kg=1),
    "in": _fixed(INCH, m=1),
    "ft": _fixed(12 * INCH, m=1),
    "mil": _fixed(INCH / 1000, m=1),
    "yr": _fixed(Fraction("365.25") * DAY, s=1),
    "rpm": _fixed(Fraction(1, 60), s=-1),
    "G": (Fraction(1, 10_000), {"kg": 1, "s": -2, "A": -1}, True),
    "Wh": (Fraction(HOUR), _ENERGY, True),
    "Ah": (Fraction(HOUR), {"A": 1, "s": 1}, True),
    "degC": _fixed(1, K=1),
    "degF": _fixed(Fraction(5, 9), K=1),
    "%": _fixed(Fraction(1, 100)),
    "ppm": _fixed(Fraction(1, 10**6)),
    "ppb": _fixed(Fraction(1, 10**9)),
    "count": _fixed(1, count=1),
}

ALIASES = {"day": "d", "a": "yr", "year": "yr", "counts": "count", "°C": "degC", "°F": "degF", "°": "deg"}

# both micro signs, both ohm signs, both raised dots, minus sign, superscripts, signs that look like degrees
SPELLINGS = str.maketrans({
    "\u00b5": "u", "\u03bc": "u", "\u03a9": "ohm", "\u2126": "ohm", "\u00b7": "*", "\u22c5": "*", "\u2212": "-",
    "\u00b2": "^2", "\u00b3": "^3", "\u00ba": "°", "\u2103": "degC", "\u2109": "degF",
})  # fmt: skip

# named coherent units, by which a product of others is told (nA * ohm is V)
COHERENT = (
    "m",
    "s",
    "A",
    "K",
    "mol",
    "cd",
    "V",
    "ohm",
    "W",
    "N",
    "Pa",
    "J",
    "C",
    "F",
    "S",
    "Wb",
    "T",
    "H",
    "Hz",
    "count",
)

HINTS = {
    "k": "a prefix needs its unit, such as kohm",
    "M": "a prefix needs its unit, such as Mohm",
    "u": "a prefix needs its unit, such as uV",
    "n": "a prefix needs its unit, such as nA",
    "p": "a prefix needs its unit, such as pF",
    "Vpp": "give an amplitude or a standard deviation in V; peak-to-peak is not a unit",
    "Vrms": "write V; a standard deviation stands in typ",
    "LSB": "write the step in V, or count",
    "FS": "write % alone; full scale is said by a member of its own",
    "ppt": "write it in ppb or %; ppt is a thousandth to some and a trillionth to others",
    "rtHz": "write sqrt(Hz)",
    "hr": "write h",
    "sec": "write s",
    "mo": "write d or yr",
    "Nm": "write N*m",
    "dB": "a figure in dB stands alone, such as 90 dB",
}
