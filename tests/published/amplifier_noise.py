"""Noise density of an instrumentation amplifier and its source resistances, in a band of 1 Hz."""

SOURCE = (
    "AD8421 data sheet, Rev. 0, p. 24, and AD8428 data sheet, Rev. A, p. 17, Analog Devices (read in copies; "
    "recomputed). A resistor counts 4 nV/sqrt(Hz) times the root of its kohm, as printed there"
)


def body(*sources):
    """Amplifier of gain 100; every source is a density ``per`` the root of the bandwidth."""
    common = {"effect": "offset", "per": "bandwidth", "law": "sqrt", "varies_by": "reading"}
    named = [{"name": f"n{i}", **common, **source} for i, source in enumerate(sources, 1)]
    return {
        "input": {"unit": "nV", "values": [0]},
        "conditions": {"bandwidth": {"nominal": "0 Hz", "values": ["1 Hz"]}},
        "stages": [{"name": "amplifier", "gain": 100, "sources": named}],
        "refer_to": "input",
        "methods": ["rss"],
    }


def resistor(kilo_ohm):
    """Thermal noise by the rule of the data sheet."""
    return {"typ": f"{4 * kilo_ohm**0.5!r} nV/sqrt(Hz)"}


def current(density, resistance):
    """Build a current noise that flows through a source resistance."""
    return {"typ": f"{density} pA/sqrt(Hz)", "times": resistance}


SIGMA = "points.0.rss.sigma"
SOURCES = [resistor(4), resistor(1)]
VOLTAGE = [{"typ": "3.2 nV/sqrt(Hz)"}, {"typ": "60 nV/sqrt(Hz)", "at": "output"}, resistor(0.1)]
CURRENT = [current(0.2, "4 kohm"), current(0.2, "1 kohm")]
LARGER_CURRENT = [current(1.5, "4 kohm"), current(1.5, "1 kohm")]

CASES = [
    ("source resistances", body(*SOURCES), [(SIGMA, 8.9, 0.05, "nV"), (SIGMA, 8.94427191, 1e-8, "nV, recomputed")]),
    ("AD8421 voltage", body(*VOLTAGE), [(SIGMA, 3.5, 0.05, "nV"), (SIGMA, 3.492849839, 1e-8, "nV, recomputed")]),
    ("AD8421 current", body(*CURRENT), [(SIGMA, 0.8, 0.05, "nV"), (SIGMA, 0.8246211251, 1e-8, "nV, recomputed")]),
    (
        "AD8421 total",
        body(*SOURCES, *VOLTAGE, *CURRENT),
        [(SIGMA, 9.6, 0.05, "nV"), (SIGMA, 9.637427043, 1e-8, "nV, recomputed (9.597 from the rounded parts)")],
    ),
    ("AD8428 current", body(*LARGER_CURRENT), [(SIGMA, 6.2, 0.05, "nV"), (SIGMA, 6.184658438, 1e-8, "nV, recomputed")]),
    (
        "AD8428 total",
        body(*SOURCES, *LARGER_CURRENT, {"typ": "1.5 nV/sqrt(Hz)"}),
        [(SIGMA, 11.0, 0.05, "nV"), (SIGMA, 10.9772492, 1e-6, "nV, recomputed")],
    ),
]
