"""Thermal noise of a resistor: a density, a root law of a condition, and a band."""

from math import sqrt

SOURCE = (
    "Johnson and Nyquist, 4 k T R B; figures as in Horowitz and Hill, The Art of Electronics (from memory; recomputed "
    "with k = 1.380649e-23 J/K)"
)

BOLTZMANN = 1.380649e-23  # J/K, exact in the SI of 2019


def body(name, nominal, value, typ):
    """One noise source ``per`` the root of a condition."""
    source = {"name": "thermal", "effect": "offset", "per": name, "law": "sqrt", "typ": typ, "varies_by": "reading"}
    return {
        "input": {"unit": "nV", "values": [0]},
        "conditions": {name: {"nominal": nominal, "values": [value]}},
        "stages": [{"name": "resistor", "gain": 1, "sources": [source]}],
        "methods": ["rss"],
    }


SIGMA = "points.0.rss.sigma"

CASES = [
    (
        "1 kohm in 1 Hz, per the root of the absolute temperature of 300 K",
        body("temperature", "0 K", "300 K", f"{sqrt(4 * BOLTZMANN * 1e3)!r} V/sqrt(K)"),
        [(SIGMA, 4.07, 0.005, "nV"), (SIGMA, 4.070354776, 1e-8, "nV, recomputed")],
    ),
    (
        "1 kohm in 1 Hz at 300 K, per the root of the resistance",
        body("resistance", "0 ohm", "1 kohm", f"{sqrt(4 * BOLTZMANN * 300)!r} V/sqrt(ohm)"),
        [(SIGMA, 4.07, 0.005, "nV"), (SIGMA, 4.070354776, 1e-8, "nV, recomputed")],
    ),
    (
        "10 kohm in 10 kHz at 293 K",
        body("bandwidth", "0 Hz", "10 kHz", f"{sqrt(4 * BOLTZMANN * 293 * 1e4)!r} V/sqrt(Hz)"),
        [
            (SIGMA, 1.3, 0.05, "uV", lambda nv: nv / 1e3),
            (SIGMA, 1.272053705, 1e-8, "uV, recomputed", lambda nv: nv / 1e3),
        ],
    ),
]
