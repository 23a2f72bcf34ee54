"""Coverage factors of the normal and the t law."""

from math import erf, sqrt

SOURCE = (
    "JCGM 100:2008, tables G.1 and G.2 (t table also NIST TN 1297, table B.1); upper percentage points: Abramowitz "
    "and Stegun, table 26.5; one-sided factors: JCGM 106:2012, table 1 (all from memory; recomputed)"
)

FACTOR = "points.0.rss.coverage_factor"
# the columns headed 68.27, 95.45 and 99.73 % are tabulated for exactly 1, 2 and 3 sigma
SIGMAS = {68.27: erf(1 / sqrt(2)), 95.45: erf(2 / sqrt(2)), 99.73: erf(3 / sqrt(2))}


def body(coverage, **dof):
    """One normal source, with degrees of freedom where the t table is meant."""
    source = {"name": "x", "effect": "offset", "typ": "1 mV", "shape": "normal", **dof}
    return {
        "input": {"unit": "mV", "values": [1]},
        "stages": [{"name": "s", "gain": 1, "sources": [source]}],
        "methods": ["rss"],
        "coverage": coverage,
    }


NORMAL = [(68.27, 1.0), (90, 1.645), (95, 1.960), (95.45, 2.0), (99, 2.576), (99.73, 3.0)]

STUDENT = [
    *[(68.27, 1, 1.84)],
    *[(95, dof, t) for dof, t in ((1, 12.71), (2, 4.30), (3, 3.18), (4, 2.78), (5, 2.57), (8, 2.31), (10, 2.23))],
    *[(95, dof, t) for dof, t in ((19, 2.09), (20, 2.09), (50, 2.01))],
    *[(95.45, dof, t) for dof, t in ((1, 13.97), (10, 2.28), (20, 2.13), (50, 2.05))],
    *[(99, dof, t) for dof, t in ((1, 63.66), (10, 3.17), (16, 2.92), (20, 2.85))],
    *[(99.73, dof, t) for dof, t in ((1, 235.80), (2, 19.21), (5, 5.51), (10, 3.96), (20, 3.42), (50, 3.16))],
    *[(99.73, 100, 3.08)],
]

UPPER_POINTS = [(0.1, 1.28155), (0.05, 1.64485), (0.025, 1.95996), (0.01, 2.32635), (0.005, 2.57583), (0.001, 3.09023)]

ONE_SIDED = [(0.80, 0.84), (0.90, 1.28), (0.95, 1.64), (0.99, 2.33), (0.999, 3.09)]

CASES = [
    *[(f"k of {p} %", body(p / 100), [(FACTOR, k, 0.0005, "")]) for p, k in NORMAL],
    *[
        (f"t of {p} %, {dof} degrees of freedom", body(SIGMAS.get(p, p / 100), dof=dof), [(FACTOR, t, 0.00501, "")])
        for p, dof, t in STUDENT
    ],
    *[(f"x of upper tail {q}", body(1 - 2 * q), [(FACTOR, x, 5.01e-6, "")]) for q, x in UPPER_POINTS],
    *[(f"one-sided z of {p}", body(2 * p - 1), [(FACTOR, z, 0.00501, "")]) for p, z in ONE_SIDED],
]
