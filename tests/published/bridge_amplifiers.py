"""Two amplifiers behind a bridge, an integrated and a discrete one: absolute, drift and resolution errors."""

from math import sqrt

SOURCE = "LT1167 data sheet, table 1, p. 15, Linear Technology (read in a copy; recomputed)"


def offset(name, figure, **more):
    """Build an offset with a lone limit."""
    return {"name": name, "effect": "offset", "max": figure, **more}


OUT = {"at": "output"}
DRIFTING = {"per": "temperature"}

INTEGRATED = {
    "absolute": [
        offset("vos", "60 uV"),
        offset("voso", "300 uV", **OUT),
        offset("ios", "450 pA", times="175 ohm"),
        {"name": "cmr", "effect": "offset", "per": "common_mode", "min": "110 dB"},
    ],
    "drift": [
        {"name": "gd", "effect": "gain", "max": "60 ppm/K", **DRIFTING},  # printed as 50 + 10 ppm/K
        offset("vd", "0.4 uV/K", **DRIFTING),
        offset("vod", "6 uV/K", **OUT, **DRIFTING),
    ],
    "resolution": [{"name": "nl", "effect": "nonlinearity", "max": "15 ppm"}, offset("n", "0.28 uV")],
}

DISCRETE = {
    "absolute": [
        offset("vos", "100 uV"),
        offset("voso", "120 uV", **OUT),  # two amplifiers of 60 uV
        offset("ios", "450 pA", times="175 ohm"),
        offset("cmr", "0.02 %", **OUT, per="common_mode"),  # resistor match
    ],
    "drift": [
        {"name": "gd", "effect": "gain", "max": "100 ppm/K", **DRIFTING},
        offset("vd", "1.6 uV/K", **DRIFTING),
        offset("vod", "2.2 uV/K", **OUT, **DRIFTING),  # two amplifiers of 1.1 uV/K
    ],
    "resolution": [{"name": "nl", "effect": "nonlinearity", "max": "10 ppm"}, offset("n", f"{0.3 * sqrt(2)!r} uV")],
}


def body(sources):
    """20 mV full scale at gain 100, 5 V common mode, 25 to 85 degC."""
    return {
        "input": {"unit": "mV", "values": [20]},
        "conditions": {
            "common_mode": {"nominal": "0 V", "values": ["5 V"]},
            "temperature": {"nominal": "25 degC", "values": ["85 degC"]},
        },
        "stages": [{"name": "amplifier", "gain": 100, "full_scale": "2 V", "sources": sources}],
        "refer_to": "input",
        "methods": ["worst_case", "rss"],
    }


def ppm(millivolts):
    """Part of the full scale of 20 mV."""
    return 1e6 * millivolts / 20


def bounds(published):
    """Rows of the terms: printed to 1 ppm; the common-mode term 790 is printed from a rounded 3.16 ppm."""
    return [
        (f"contributions.amplifier/{name}.bound", value, 1 if value == 790 else 0.5, "ppm of full scale", ppm)
        for name, value in published.items()
    ]


def total(printed, tolerance, exact):
    """Rows of a total, as printed and recomputed."""
    path = "points.0.worst_case.first_order.upper"
    return [
        (path, printed, tolerance, "ppm of full scale", ppm),
        (path, exact, 1e-3, "ppm of full scale, recomputed", ppm),
    ]


def everything(groups):
    """All sources of an amplifier."""
    return [source for sources in groups.values() for source in sources]


CASES = [
    (
        "integrated, all terms",
        body(everything(INTEGRATED)),
        bounds({"vos": 3000, "voso": 150, "ios": 4, "cmr": 790, "gd": 3600, "vd": 1200, "vod": 180, "nl": 15, "n": 14})
        + total(8953, 1.5, 8953.506915),
    ),
    ("integrated, absolute", body(INTEGRATED["absolute"]), total(3944, 1, 3944.506915)),
    ("integrated, drift", body(INTEGRATED["drift"]), total(4980, 0.5, 4980)),
    ("integrated, resolution", body(INTEGRATED["resolution"]), total(29, 0.5, 29)),
    (
        "discrete, all terms",
        body(everything(DISCRETE)),
        bounds({"vos": 5000, "voso": 60, "ios": 4, "cmr": 500, "gd": 6000, "vd": 4800, "vod": 66, "nl": 10, "n": 21})
        + total(16461, 1.5, 16461.1507),
    ),
    ("discrete, absolute", body(DISCRETE["absolute"]), total(5564, 0.5, 5563.9375)),
    ("discrete, drift", body(DISCRETE["drift"]), total(10866, 0.5, 10866)),
    ("discrete, resolution", body(DISCRETE["resolution"]), total(31, 0.5, 31.21320344)),
]
