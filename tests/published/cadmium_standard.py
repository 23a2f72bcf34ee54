"""Preparation of a calibration standard: a triangular, a normal and a uniform term, then a relative sum."""

SOURCE = "EURACHEM/CITAC guide QUAM, example A1, tables A1.1 and A1.3 (from memory; recomputed)"


def body(unit, value, *sources):
    """Terms of one stage."""
    return {
        "input": {"unit": unit, "values": [value]},
        "stages": [{"name": "s", "gain": 1, "sources": list(sources)}],
        "methods": ["rss"],
    }


CASES = [
    (
        "volume of the flask (a ml is written cm^3)",
        body(
            "cm^3",
            100,
            {"name": "calibration", "effect": "offset", "max": "0.1 cm^3", "shape": "triangular"},
            {"name": "repeatability", "effect": "offset", "typ": "0.02 cm^3"},
            {"name": "temperature", "effect": "offset", "max": "0.084 cm^3"},
        ),
        [
            ("contributions.s/calibration.sigma", 0.04, 0.005, "ml"),
            ("contributions.s/temperature.sigma", 0.05, 0.005, "ml"),
            ("points.0.rss.sigma", 0.07, 0.005, "ml"),
        ],
    ),
    (
        "concentration (in mg, for one litre)",
        body(
            "mg",
            1002.7,
            {"name": "purity", "effect": "gain", "max": "0.0001"},
            {"name": "mass", "effect": "gain", "typ": "0.0005"},
            {"name": "volume", "effect": "gain", "typ": "0.0007"},
        ),
        [
            ("contributions.s/purity.sigma", 0.000058, 0.0000005, ""),
            ("points.0.rss.sigma", 0.0009, 0.00005, "relative", lambda u: u / 1002.7),
            ("points.0.rss.sigma", 0.9, 0.05, "mg/l"),
        ],
    ),
]
