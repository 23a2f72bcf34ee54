"""Product of three factors, each the mean of some readings: effective degrees of freedom."""

SOURCE = "JCGM 100:2008, G.4.1, example: Y = b X1 X2 X3 (from memory; recomputed)"

FACTORS = [("X1", "0.25 %", 9), ("X2", "0.57 %", 4), ("X3", "0.82 %", 14)]  # n = 10, 5, 15 readings

BODY = {
    "input": {"unit": "V", "values": [1]},
    "stages": [
        {
            "name": name,
            "gain": 1,
            "sources": [{"name": "mean", "effect": "gain", "typ": u, "dof": dof, "shape": "normal"}],
        }
        for name, u, dof in FACTORS
    ],
    "methods": ["rss"],
    "coverage": 0.95,
}


def percent(share):
    """Share in percent."""
    return 100 * share


CASES = [
    (
        "Welch-Satterthwaite",
        BODY,
        [
            ("points.0.rss.sigma", 1.03, 0.005, "%", percent),
            ("points.0.rss.sigma", 1.029465881, 1e-8, "%, recomputed", percent),
            ("points.0.rss.dof", 19.0, 0.05, ""),
            ("points.0.rss.dof", 18.99874231, 1e-6, "recomputed"),
            ("points.0.rss.coverage_factor", 2.09, 0.005, "t of 95 %, 19 degrees of freedom"),
            ("points.0.rss.upper", 2.2, 0.05, "%, expanded", percent),
            ("points.0.rss.upper", 2.154696852, 1e-4, "%, recomputed with 19 degrees of freedom", percent),
        ],
    ),
]
