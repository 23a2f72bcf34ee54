"""Sums of four quantities: where the law of propagation holds and where it does not."""

from math import sqrt

SOURCE = "JCGM 101:2008, 9.2.2 (table 2), 9.2.3 (table 3), 9.2.4 (table 4); 7.9.2, examples (from memory; recomputed)"

TRIALS = 1_000_000  # as in the document; standard error of a 95 % end point 0.0054, 0.0048 and 0.0096 V
SPREAD = {"normal": 0.027, "uniform": 0.024, "dominant": 0.048}  # five standard errors
LOWER, UPPER = "points.0.monte_carlo.lower", "points.0.monte_carlo.upper"


def body(*figures, trials=TRIALS):
    """Sum of sources at gain 1, 95 % intervals."""
    sources = [{"name": f"X{i}", "effect": "offset", **f} for i, f in enumerate(figures, 1)]
    return {
        "input": {"unit": "V", "values": [0]},
        "stages": [{"name": "sum", "gain": 1, "sources": sources}],
        "methods": ["worst_case", "rss", "monte_carlo"],
        "coverage": 0.95,
        "monte_carlo": {"trials": trials, "seed": 20},
    }


NORMAL = {"typ": "1 V"}
UNIFORM = {"max": f"{sqrt(3)!r} V"}
WIDE = {"max": f"{10 * sqrt(3)!r} V"}

CASES = [
    (
        "9.2.2, four standard normals",
        body(*[NORMAL] * 4),
        [
            ("points.0.rss.sigma", 2.0, 1e-12, "V"),
            ("points.0.rss.upper", 3.92, 0.005, "V"),
            ("points.0.rss.upper", 3.919927969, 1e-8, "V, recomputed"),
            ("points.0.rss.cut", False, 0, ""),
            ("points.0.monte_carlo.sigma", 2.0, 0.005 + 0.007, "V"),
            (LOWER, -3.92, 0.005 + SPREAD["normal"], "V"),
            (UPPER, 3.92, 0.005 + SPREAD["normal"], "V"),
            ("checks.tolerance", 0.05, 1e-12, "V"),
        ],
    ),
    (
        "9.2.3, four uniform laws of equal width: 3.88, not 3.92",
        body(*[UNIFORM] * 4),
        [
            ("points.0.rss.sigma", 2.0, 1e-12, "V"),
            ("points.0.rss.upper", 3.92, 0.005, "V"),
            (LOWER, -3.879406741, SPREAD["uniform"], "V, 2 sqrt 3 (2 - 0.6^(1/4)); printed -3.88"),
            (UPPER, 3.879406741, SPREAD["uniform"], "V, 2 sqrt 3 (2 - 0.6^(1/4)); printed 3.88"),
            ("points.0.worst_case.upper", 4 * sqrt(3), 1e-12, "V, by definition"),
        ],
    ),
    (
        "9.2.4, one of them ten times wider",
        body(*[UNIFORM] * 3, WIDE),
        [
            ("points.0.rss.sigma", 10.1, 0.05, "V"),
            ("points.0.rss.sigma", sqrt(103), 1e-12, "V, recomputed"),
            ("points.0.rss.upper", 19.9, 0.05, "V"),
            ("points.0.rss.upper", 19.89146195, 1e-7, "V, recomputed"),
            (LOWER, -17.0, 0.05 + SPREAD["dominant"], "V"),
            (UPPER, 17.0, 0.05 + SPREAD["dominant"], "V"),
            ("checks.tolerance", 0.5, 1e-12, "V"),
            ("checks.rss_holds", False, 0, "printed: not validated"),
        ],
    ),
    (
        "7.9.2, numerical tolerance of two significant digits, u = 0.000 35",
        body({"typ": "0.00035 V"}, trials=10_000),
        [("checks.tolerance", 0.000005, 1e-12, "V")],
    ),
]
