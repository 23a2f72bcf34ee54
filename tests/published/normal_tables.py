"""Content of the normal law inside a limit, and parts per million outside it."""

SOURCE = (
    "Abramowitz and Stegun, table 26.1; JCGM 100:2008, table G.1; Montgomery, Introduction to Statistical Quality "
    "Control (parts outside k sigma, six sigma with a shift of 1.5); peak-to-peak against rms noise: MT-048, Analog "
    "Devices (all from memory; recomputed)"
)

YIELD, OUTSIDE = "points.0.rss.yield", "points.0.rss.outside_ppm"


def body(**limit):
    """One normal source of 1 uV."""
    return {
        "input": {"unit": "uV", "values": [0]},
        "stages": [{"name": "s", "gain": 1, "sources": [{"name": "x", "effect": "offset", "typ": "1 uV"}]}],
        "limit": limit,
        "methods": ["rss"],
    }


def percent(share):
    """Share in percent."""
    return 100 * share


def percent_of_ppm(ppm):
    """Parts per million in percent."""
    return ppm / 1e4


ONE_SIDED = [(1, 0.841344746068543), (2, 0.977249868051821), (3, 0.998650101968370)]
INSIDE = [(1, 68.27, 0.005), (2, 95.45, 0.005), (3, 99.73, 0.005), (4, 99.9937, 0.00005)]
OUTSIDE_PPM = [(3, 2700, 0.5), (4, 63.3, 0.051), (5, 0.57, 0.0051), (6, 0.002, 0.0005)]
OUTSIDE_EXACT = [(3, 2699.796063), (4, 63.34248367), (5, 0.5733031438), (6, 0.00197317529)]
PEAK_TO_PEAK = [(2, 32, 0.5), (3, 13, 0.5), (4, 4.6, 0.051), (5, 1.2, 0.05), (6, 0.27, 0.005), (6.6, 0.10, 0.005)]
PEAK_TO_PEAK += [(7, 0.046, 0.0006), (8, 0.006, 0.0005)]

CASES = [
    *[(f"P({x})", body(min="-1000 uV", max=f"{x} uV"), [(YIELD, p, 2e-15, "15 printed digits")]) for x, p in ONE_SIDED],
    *[(f"inside {k} sigma", body(max=f"{k} uV"), [(YIELD, p, tol, "%", percent)]) for k, p, tol in INSIDE],
    *[(f"outside {k} sigma", body(max=f"{k} uV"), [(OUTSIDE, p, tol, "ppm")]) for k, p, tol in OUTSIDE_PPM],
    *[
        (f"outside {k} sigma, full precision", body(max=f"{k} uV"), [(OUTSIDE, p, 1e-8 * p, "ppm, recomputed")])
        for k, p in OUTSIDE_EXACT
    ],
    (
        "six sigma with a shift of 1.5",
        {
            **body(max="6 uV"),
            "stages": [
                {
                    "name": "s",
                    "gain": 1,
                    "sources": [{"name": "x", "effect": "offset", "typ": "1 uV", "mean": "1.5 uV", "shape": "normal"}],
                }
            ],
        },
        [(OUTSIDE, 3.4, 0.05, "ppm"), (OUTSIDE, 3.397673157, 1e-8, "ppm, recomputed")],
    ),
    *[
        (
            f"noise beyond a peak-to-peak value of {m} x rms",
            body(max=f"{m / 2} uV"),
            [(OUTSIDE, share, tol, "% of the time", percent_of_ppm)],
        )
        for m, share, tol in PEAK_TO_PEAK
    ],
]
