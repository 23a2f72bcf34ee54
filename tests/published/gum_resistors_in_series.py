"""Ten resistors in series, all compared with one standard."""

from itertools import combinations

SOURCE = "JCGM 100:2008, 5.2.2, example (from memory; recomputed)"

NAMES = [f"R{i}" for i in range(1, 11)]
PAIRS = [{"between": [f"series/{a}", f"series/{b}"], "coefficient": 1} for a, b in combinations(NAMES, 2)]


def body(correlations):
    """Sum of ten resistances of 1000 ohm, standard uncertainty 100 mohm each."""
    sources = [{"name": name, "effect": "offset", "typ": "100 mohm"} for name in NAMES]
    return {
        "input": {"unit": "ohm", "values": ["10 kohm"]},
        "stages": [{"name": "series", "gain": 1, "sources": sources}],
        "correlations": correlations,
        "methods": ["rss"],
        "coverage_factor": 1,
    }


CASES = [
    (
        "coefficient 1 adds linearly",
        body(PAIRS),
        [("points.0.rss.sigma", 1.0, 1e-9, "ohm"), ("points.0.rss.upper", 1.0, 1e-9, "ohm, one standard uncertainty")],
    ),
    (
        "taken as uncorrelated (printed as the wrong answer)",
        body([]),
        [("points.0.rss.sigma", 0.32, 0.005, "ohm"), ("points.0.rss.sigma", 0.316227766, 1e-9, "ohm, recomputed")],
    ),
    (
        "the same as ten stages, one cause through the whole chain",
        {
            "input": {"unit": "ohm", "values": [0]},
            "stages": [
                {"name": name, "gain": 1, "sources": [{"name": "R", "effect": "offset", "typ": "100 mohm"}]}
                for name in NAMES
            ],
            "correlations": [{"between": [f"{a}/R", f"{b}/R"], "coefficient": 1.0} for a, b in combinations(NAMES, 2)],
            "methods": ["rss"],
        },
        [("points.0.rss.sigma", 1.0, 1e-9, "ohm")],
    ),
]
