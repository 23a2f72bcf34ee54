"""Standard uncertainty from the figures a certificate or data sheet states."""

from math import sqrt

SOURCE = "JCGM 100:2008, 4.3.3 to 4.3.9, 4.4.3, 4.4.5, 4.4.6 and F.2.2.1, examples (clauses from memory; recomputed)"


def body(unit, figures, **rules):
    """One source at gain 1."""
    return {
        "input": {"unit": unit, "values": [100]},
        "stages": [{"name": "s", "gain": 1, "sources": [{"name": "x", "effect": "offset", **figures}]}],
        "rules": rules,
        "methods": ["rss"],
    }


SIGMA = "contributions.s/x.sigma"

CASES = [
    (
        "4.3.7 example 1, a lone limit is uniform: thermal expansion of copper in 1e-6 / K",
        body("ppm/K", {"max": "0.40 ppm/K"}),
        [
            (SIGMA, 0.23, 0.005, "1e-6/K"),
            (SIGMA, 0.2309401077, 1e-10, "1e-6/K, recomputed"),
            ("contributions.s/x.shape", "uniform", 0, ""),
            ("points.0.rss.sigma", 0.2309401077, 1e-10, "1e-6/K, recomputed"),
        ],
    ),
    (
        "4.3.3, 240 microgram stated as three standard deviations",
        body("ug", {"max": "240 ug", "shape": "normal"}, max_sigmas=3),
        [(SIGMA, 80, 1e-9, "ug")],
    ),
    (
        "4.3.4, 129 microohm stated with 99 %, by its factor 2.576",
        body("uohm", {"max": "129 uohm", "shape": "normal"}, max_sigmas=2.576),
        [(SIGMA, 50, 0.5, "uohm"), (SIGMA, 5.0, 0.05, "1e-6 of 10.000742 ohm", lambda u: u / 10.000742)],
    ),
    (
        "4.3.4, 129 microohm stated with 99 %, by the share inside (the limit far away cuts nothing)",
        body("uohm", {"typ": "129 uohm", "max": "1300 uohm"}, typ_covers=0.99),
        [(SIGMA, 50, 0.5, "uohm"), (SIGMA, 50.08095832, 1e-7, "uohm, recomputed")],
    ),
    (
        "4.3.5, half of the values inside +-0.04: u = 1.48 a",
        body("mm", {"typ": "0.04 mm", "max": "1 mm"}, typ_covers=0.5),
        [
            (SIGMA, 0.06, 0.005, "mm"),
            (SIGMA, 1.48, 0.005, "a", lambda u: u / 0.04),
            (SIGMA, 1.482602219, 1e-8, "a, recomputed", lambda u: u / 0.04),
        ],
    ),
    (
        "4.4.5, uniform between 96 and 104",
        body("degC", {"min": 96, "max": 104}),
        [
            (SIGMA, 2.3, 0.05, "degC"),
            (SIGMA, 4 / sqrt(3), 1e-12, "degC, recomputed"),
            ("contributions.s/x.mean", 100, 1e-12, "degC"),
            ("contributions.s/x.bounds.0", 96, 1e-12, "degC"),
            ("contributions.s/x.bounds.1", 104, 1e-12, "degC"),
        ],
    ),
    (
        "4.4.6, triangular between 96 and 104",
        body("degC", {"min": 96, "max": 104, "shape": "triangular"}),
        [
            (SIGMA, 1.6, 0.05, "degC"),
            (SIGMA, 4 / sqrt(6), 1e-12, "degC, recomputed"),
            ("contributions.s/x.mean", 100, 1e-12, "degC"),
        ],
    ),
    (
        "F.2.2.1, a digital step of 1",
        body("mV", {"max": "0.5 mV"}),
        [(SIGMA, 0.29, 0.005, "of the step"), (SIGMA, 0.2886751346, 1e-10, "of the step, recomputed")],
    ),
    (
        "4.4.3, mean of 20 readings of standard deviation 1.489",
        {**body("degC", {"typ": 1.489, "varies_by": "reading"}), "readings_averaged": 20},
        [("points.0.rss.sigma", 0.333, 0.0005, "degC"), ("points.0.rss.sigma", 1.489 / sqrt(20), 1e-12, "recomputed")],
    ),
    (
        "4.3.9 note 1, trapezoid with top half its base: a sqrt((1 + 0.25) / 6)",
        body("mV", {"max": "1 mV", "shape": "trapezoidal", "top_ratio": 0.5}),
        [(SIGMA, sqrt(1.25 / 6), 1e-12, "mV, formula")],
    ),
    (
        "arcsine law of half-width a: a / sqrt 2 (JCGM 101:2008, 6.4.6)",
        body("mV", {"max": "1 mV", "shape": "arcsine"}),
        [(SIGMA, 1 / sqrt(2), 1e-12, "mV, formula")],
    ),
    (
        "two equally probable values +-a: a",
        body("mV", {"max": "1 mV", "shape": "two_point"}),
        [(SIGMA, 1.0, 1e-12, "mV, by definition")],
    ),
    (
        "t law of 5 degrees of freedom: scale times sqrt(5 / 3) (JCGM 101:2008, 6.4.9)",
        body("mV", {"typ": "1 mV", "dof": 5, "shape": "student_t"}),
        [(SIGMA, sqrt(5 / 3), 1e-12, "mV, formula")],
    ),
]
