"""Hand-held multimeter at 100 V: one uniform law dominates, so the factor is 1.65 to 1.71, not 1.96."""

from math import sqrt

SOURCE = "EA-4/02, supplement 2, S9 (from memory; recomputed)"

CHAIN = {
    "input": {"unit": "V", "values": [100]},
    "stages": [
        {
            "name": "multimeter",
            "gain": 1,
            "sources": [
                {"name": "resolution", "effect": "offset", "max": "0.05 V"},
                {"name": "calibrator", "effect": "offset", "max": "0.011 V"},
                {"name": "calibrator's certificate", "effect": "offset", "typ": "0.001 V", "shape": "normal"},
            ],
        }
    ],
}
DRAWN = {
    **CHAIN,
    "methods": ["worst_case", "rss", "monte_carlo"],
    "coverage": 0.95,
    "monte_carlo": {"trials": 200_000, "seed": 9},  # standard error of an end point 0.000074 V
}
EXPANDED = {**CHAIN, "methods": ["rss"], "coverage_factor": 0.95 * sqrt(3)}

CASES = [
    (
        "contributions and the true interval",
        DRAWN,
        [
            ("contributions.multimeter/resolution.sigma", 0.029, 0.0005, "V"),
            ("contributions.multimeter/calibrator.sigma", 0.0064, 0.00005, "V"),
            ("contributions.multimeter/resolution.variance_share", 0.05**2 / 3 / 0.02957476402**2, 1e-8, "recomputed"),
            ("points.0.rss.sigma", 0.030, 0.0005, "V"),
            ("points.0.rss.sigma", 0.02957476402, 1e-10, "V, recomputed"),
            ("points.0.monte_carlo.upper", 0.05, 0.005, "V"),
            ("points.0.monte_carlo.upper", 0.050560, 0.0004, "V, exact, five standard errors"),
            ("points.0.monte_carlo.lower", -0.050560, 0.0004, "V, exact, five standard errors"),
            ("checks.rss_holds", False, 0, "the normal law's interval is 0.058 V"),
        ],
    ),
    (
        "expanded with the factor of a uniform law, 0.95 sqrt 3",
        EXPANDED,
        [
            ("points.0.rss.coverage_factor", 1.65, 0.005, ""),
            ("points.0.rss.upper", 0.05, 0.005, "V"),
            ("points.0.rss.upper", 0.04866, 1e-5, "V, recomputed"),
        ],
    ),
]
