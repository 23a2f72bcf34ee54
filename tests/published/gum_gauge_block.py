"""End gauge calibration: four contributions with their degrees of freedom."""

SOURCE = "JCGM 100:2008, H.1 (table H.1, H.1.3.2, H.1.6, H.1.7; from memory; recomputed)"


LENGTH = [
    ("standard", "25 nm", 18),
    ("difference", "9.7 nm", 25.6),
    ("expansion difference", "2.9 nm", 50),
    ("temperature difference", "16.6 nm", 2),
]


def body(*terms, **factor):
    """Independent contributions to a length, each (name, standard uncertainty, degrees of freedom)."""
    sources = [{"name": name, "effect": "offset", "typ": u, "dof": dof, "shape": "normal"} for name, u, dof in terms]
    return {
        "input": {"unit": "nm", "values": ["50 mm"]},
        "stages": [{"name": "gauge", "gain": 1, "sources": sources}],
        "methods": ["rss"],
        **factor,
    }


CASES = [
    (
        "H.1.3.2, difference from the standard",
        body(("repeated", "5.8 nm", 24), ("random", "3.9 nm", 5), ("systematic", "6.7 nm", 8)),
        [
            ("points.0.rss.sigma", 9.7, 0.05, "nm"),
            ("points.0.rss.dof", 25.6, 0.25, "printed from the rounded 9.7 nm; 25.44 unrounded"),
        ],
    ),
    (
        "table H.1, length of the gauge",
        body(*LENGTH, coverage=0.99),
        [
            ("points.0.rss.sigma", 32, 0.5, "nm"),
            ("points.0.rss.sigma", 31.6711, 1e-4, "nm, recomputed"),
            ("points.0.rss.dof", 16.7, 0.1, ""),
            ("points.0.rss.dof", 16.7645, 1e-3, "recomputed"),
            ("points.0.rss.coverage_factor", 2.92, 0.02, "printed for 16 degrees of freedom; 2.90 for 16.76"),
        ],
    ),
    (
        "H.1.7, expanded with the printed factor",
        body(*LENGTH, coverage_factor=2.92),
        [("points.0.rss.upper", 93, 0.6, "nm; printed from u = 32 nm, 92.48 from 31.67 nm")],
    ),
]
