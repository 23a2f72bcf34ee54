"""A voltmeter whose limit is a part of the reading plus a part of the range, with a repeatability term."""

SOURCE = "JCGM 100:2008, 4.3.7 example 2 and 5.1.5 example (from memory; recomputed)"

READING_PART = {"name": "of reading", "effect": "gain", "max": "14 ppm"}
RANGE_PART = {"name": "of range", "effect": "offset", "at": "output", "max": "2 uV"}
REPEATABILITY = {"name": "repeatability", "effect": "offset", "typ": "12 uV"}


def body(*sources):
    """Build the voltmeter; both parts of its limit stand for one uniform error, hence the coefficient 1."""
    return {
        "input": {"unit": "uV", "values": ["0.928571 V"]},
        "stages": [{"name": "voltmeter", "gain": 1, "sources": list(sources)}],
        "correlations": [{"between": ["voltmeter/of reading", "voltmeter/of range"], "coefficient": 1}],
        "methods": ["worst_case", "rss"],
    }


CASES = [
    (
        "the instrument's limit",
        body(READING_PART, RANGE_PART),
        [
            ("points.0.worst_case.first_order.upper", 15, 0.5, "uV"),
            ("points.0.worst_case.first_order.upper", 14.999994, 1e-9, "uV, recomputed"),
            ("points.0.worst_case.first_order.lower", -14.999994, 1e-9, "uV, recomputed"),
            ("points.0.worst_case.upper", 14.999994, 1e-9, "uV, recomputed: nothing is amplified twice"),
            ("points.0.rss.sigma", 8.7, 0.05, "uV"),
            ("points.0.rss.sigma", 8.660250574, 1e-8, "uV, recomputed"),
        ],
    ),
    (
        "combined with the repeatability of the mean",
        body(READING_PART, RANGE_PART, REPEATABILITY),
        [
            ("points.0.rss.sigma", 15, 0.5, "uV"),
            ("points.0.rss.sigma", 16, 0.5, "1e-6 of the reading", lambda u: u / 0.928571),
            ("points.0.rss.sigma", 14.79864656, 1e-7, "uV, recomputed"),
        ],
    ),
]
