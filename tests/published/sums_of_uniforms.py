"""Sums of uniform laws against their closed forms."""

from math import sqrt

SOURCE = (
    "Irwin-Hall law: Johnson, Kotz and Balakrishnan, Continuous Univariate Distributions 2, 26.9 (from memory; digits "
    "computed from the closed form)"
)


def body(count, half_width, *methods):
    """Equal uniform sources."""
    sources = [{"name": f"x{i}", "effect": "offset", "max": f"{half_width} V"} for i in range(count)]
    return {
        "input": {"unit": "V", "values": [0]},
        "stages": [{"name": "s", "gain": 1, "sources": sources}],
        "methods": list(methods),
        "coverage": 0.95,
        "monte_carlo": {"trials": 200_000, "seed": 26},
    }


CASES = [
    (
        "twelve of width 1 have unit variance",
        body(12, 0.5, "worst_case", "rss"),
        [("points.0.rss.sigma", 1.0, 1e-12, "V"), ("points.0.worst_case.upper", 6.0, 1e-12, "V")],
    ),
    (
        "two are triangular: 95 % inside 2 a (1 - sqrt 0.05)",  # standard error 0.0031 V
        body(2, 1, "rss", "monte_carlo"),
        [
            ("points.0.monte_carlo.upper", 2 * (1 - sqrt(0.05)), 0.016, "V, five standard errors"),
            ("points.0.monte_carlo.lower", -2 * (1 - sqrt(0.05)), 0.016, "V, five standard errors"),
            ("points.0.rss.sigma", sqrt(2 / 3), 1e-12, "V"),
        ],
    ),
]
