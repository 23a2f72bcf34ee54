"""Probability that a measured property conforms to one or two limits."""

SOURCE = (
    "JCGM 106:2012, clause 7, examples (breakdown voltage, burst pressure, oil viscosity); ILAC-G8:09/2019, table 1 "
    "(all from memory; recomputed)"
)

YIELD, OUTSIDE = "points.0.rss.yield", "points.0.rss.outside_ppm"


def body(unit, sigma, low, high, **more):
    """One normal law about the measured value; the limits stand relative to that value."""
    return {
        "input": {"unit": unit, "values": [0]},
        "stages": [{"name": "s", "gain": 1, "sources": [{"name": "u", "effect": "offset", "typ": sigma}]}],
        "limit": {"min": low, "max": high},
        "methods": ["rss"],
        **more,
    }


def percent(ppm):
    """Parts per million in percent."""
    return ppm / 1e4


# guard band as a multiple of U = 2 u, printed upper bound of the risk in %, risk recomputed
GUARD_BANDS = [
    (0.0, 50, 1e-9, 50.0),
    (0.83, 5, 0.5, 4.845722627),
    (1.0, 2.5, 0.25, 2.275013195),
    (1.5, 0.16, 0.03, 0.1349898032),
    (3.0, 1e-4, 1e-4, 0.000986587645e-4),
]

CASES = [
    (
        "7.3, breakdown voltage -5.47 V, u = 0.05 V, upper limit -5.40 V",
        body("V", "0.05 V", "-10 V", "0.07 V"),
        [(YIELD, 0.92, 0.005, ""), (YIELD, 0.9192433408, 1e-9, "recomputed")],
    ),
    (
        "7.3, burst pressure 509.7 kPa, u = 8.6 kPa, lower limit 490 kPa",
        body("kPa", "8.6 kPa", "-19.7 kPa", "1 MPa"),
        [(YIELD, 0.99, 0.005, ""), (YIELD, 0.9890095474, 1e-9, "recomputed")],
    ),
    (
        "7.4, kinematic viscosity 13.6 mm2/s, u = 1.8 mm2/s, limits 12.5 and 16.3 mm2/s",
        body("mm^2/s", "1.8 mm^2/s", "-1.1 mm^2/s", "2.7 mm^2/s"),
        [(YIELD, 0.66, 0.005, ""), (YIELD, 0.6626297865, 1e-9, "recomputed")],
    ),
    (
        "7.4, the same drawn",  # standard error of the share 0.0011
        body(
            "mm^2/s",
            "1.8 mm^2/s",
            "-1.1 mm^2/s",
            "2.7 mm^2/s",
            methods=["monte_carlo"],
            monte_carlo={"trials": 200_000, "seed": 106},
        ),
        [
            ("points.0.monte_carlo.yield", 0.6626297865, 0.0053, "five standard errors"),
            ("monte_carlo.joint_yield", 0.6626297865, 0.0053, "five standard errors"),
        ],
    ),
    *[
        (
            f"ILAC-G8, risk of a reading that lies {r} U inside the limit",
            body("V", "1 V", "-1 kV", f"{2 * r!r} V"),
            [
                (OUTSIDE, bound, tolerance, "%, printed as an upper bound", percent),
                (OUTSIDE, risk, 1e-8 * risk, "%, recomputed", percent),
            ],
        )
        for r, bound, tolerance, risk in GUARD_BANDS
    ],
]
