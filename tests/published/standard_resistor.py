"""Nominal 10 kohm standard resistor: offsets and relative terms, normal, uniform and triangular."""

SOURCE = "EA-4/02, supplement 1, S3, table of contributions (from memory; recomputed: 8.33 mohm)"

BODY = {
    "input": {"unit": "mohm", "values": ["10 kohm"]},
    "stages": [
        {
            "name": "resistor",
            "gain": 1,
            "sources": [
                {"name": "standard", "effect": "offset", "typ": "5 mohm", "shape": "normal"},
                {"name": "drift", "effect": "offset", "max": "10 mohm"},
                {"name": "standard's temperature", "effect": "offset", "max": "2.75 mohm"},
                {"name": "resistor's temperature", "effect": "offset", "max": "5.5 mohm"},
                {"name": "parasitics", "effect": "gain", "max": "1 ppm", "shape": "triangular"},
                {"name": "ratio", "effect": "gain", "typ": "0.14 ppm", "shape": "normal"},
            ],
        }
    ],
    "rules": {"typ_sigmas": 2},  # certificate values are stated as expanded with factor 2
    "methods": ["rss"],
    "coverage_factor": 2,
}

CASES = [
    (
        "contributions, combined and expanded",
        BODY,
        [
            ("contributions.resistor/standard.contribution_sigma", 2.5, 1e-9, "mohm"),
            ("contributions.resistor/drift.contribution_sigma", 5.8, 0.05, "mohm"),
            ("contributions.resistor/standard's temperature.contribution_sigma", 1.6, 0.05, "mohm"),
            ("contributions.resistor/resistor's temperature.contribution_sigma", 3.2, 0.05, "mohm"),
            ("contributions.resistor/parasitics.contribution_sigma", 4.1, 0.05, "mohm"),
            ("contributions.resistor/ratio.contribution_sigma", 0.7, 0.05, "mohm"),
            ("points.0.rss.sigma", 8.33, 0.005, "mohm"),
            ("points.0.rss.sigma", 8.327314493, 1e-8, "mohm, recomputed"),
            ("points.0.rss.upper", 17, 0.5, "mohm"),
        ],
    ),
]
