"""Amplifier behind a load cell of 350 ohm: a hand table of worst-case terms in ppm of full scale."""

SOURCE = "MT-066, Analog Devices, Rev. 0 (10/08), figure 1 (read in a copy; recomputed)"

ADJUSTED_AWAY = [
    {"name": "offset", "effect": "offset", "max": "55 uV"},
    {"name": "offset current", "effect": "offset", "max": "0.5 nA", "times": "350 ohm"},
    {"name": "gain error", "effect": "gain", "max": "0.15 %"},
    {"name": "common mode", "effect": "offset", "per": "common_mode", "min": "120 dB"},
]
RESOLUTION = [
    {"name": "nonlinearity", "effect": "nonlinearity", "max": "40 ppm"},
    {"name": "noise", "effect": "offset", "max": "280 nV", "varies_by": "reading"},
]


def body(sources):
    """Build the chain: 100 mV full scale, gain 100, 5 V common mode; noise counts peak to peak, as printed."""
    return {
        "input": {"unit": "mV", "values": [100]},
        "conditions": {"common_mode": {"nominal": "0 V", "values": ["5 V"]}},
        "stages": [{"name": "amplifier", "gain": 100, "full_scale": "10 V", "sources": sources}],
        "refer_to": "input",
        "methods": ["worst_case", "rss"],
    }


def ppm(millivolts):
    """Part of the full scale of 100 mV."""
    return 1e6 * millivolts / 100


def bound(name, published, tolerance=0.5):
    """Give the expected row of one term."""
    return (f"contributions.amplifier/{name}.bound", published, tolerance, "ppm of full scale", ppm)


TOTAL = "points.0.worst_case.first_order.upper"

CASES = [
    (
        "every term and the unadjusted total",
        body(ADJUSTED_AWAY + RESOLUTION),
        [
            bound("offset", 550),
            bound("offset current", 1.8, 0.051),  # exactly half: 1.75
            bound("gain error", 1500),
            bound("nonlinearity", 40),
            bound("common mode", 50),
            bound("noise", 2.8, 0.05),
            (TOTAL, 2145, 0.5, "ppm of full scale", ppm),
            (TOTAL, 2144.55, 1e-6, "ppm of full scale, recomputed", ppm),
        ],
    ),
    (
        "resolution: what calibration does not remove",
        body(RESOLUTION),
        [(TOTAL, 42.8, 0.05, "ppm of full scale", ppm), (TOTAL, 42.8, 1e-6, "ppm of full scale, recomputed", ppm)],
    ),
]
