"""A straight-line calibration curve: intercept and slope with a partial, negative correlation."""

SOURCE = "JCGM 100:2008, H.3 (H.3.3 and H.3.4: s(y1), s(y2), r = -0.930, u of the correction at 30 degC; from memory)"

BODY = {
    "input": {"unit": "K", "values": [30]},
    "conditions": {"temperature": {"nominal": "20 degC", "values": ["30 degC"]}},
    "stages": [
        {
            "name": "correction",
            "gain": 1,
            "sources": [
                {"name": "intercept", "effect": "offset", "typ": "0.0029 K"},
                {"name": "slope", "effect": "offset", "per": "temperature", "typ": "0.67 mK/K"},
            ],
        }
    ],
    "correlations": [{"between": ["correction/intercept", "correction/slope"], "coefficient": -0.930}],
    "methods": ["rss"],
}

CASES = [
    (
        "correction at 30 degC",
        BODY,
        [
            ("points.0.rss.sigma", 0.0041, 0.00005, "K"),
            (
                "points.0.rss.sigma",
                (0.0029**2 + 0.0067**2 - 2 * 0.930 * 0.0029 * 0.0067) ** 0.5,
                1e-12,
                "K, recomputed",
            ),
        ],
    ),
]
