"""Standard deviation of a normal law cut at both sides: parts screened at test."""

SOURCE = (
    "Johnson, Kotz and Balakrishnan, Continuous Univariate Distributions 1, 10.1 and 13.10: variance 1 - 2 a phi(a) / "
    "(2 Phi(a) - 1) (from memory; digits recomputed, equal to scipy.stats.truncnorm)"
)

# cut in sigma, four digits, full precision
CUTS = [(1, 0.5396, 0.53956009), (2, 0.8796, 0.87962566), (3, 0.9866, 0.98657839), (4, 0.9995, 0.99946450)]


def body(source, **rules):
    """One source at gain 1."""
    return {
        "input": {"unit": "mV", "values": [0]},
        "stages": [{"name": "s", "gain": 1, "sources": [{"name": "x", "effect": "offset", **source}]}],
        "rules": rules,
        "methods": ["rss"],
    }


def expected(rounded, exact):
    """Rows of one cut."""
    return [
        ("contributions.s/x.sigma", rounded, 5e-5, "of the parent's sigma"),
        ("contributions.s/x.sigma", exact, 6e-9, "of the parent's sigma, recomputed"),
        ("points.0.rss.sigma", exact, 6e-9, "of the parent's sigma, recomputed"),
        ("contributions.s/x.shape", "truncated_normal", 0, ""),
    ]


CASES = [
    *[
        (f"typ is the parent's sigma, max cuts at {a} sigma", body({"typ": "1 mV", "max": f"{a} mV"}), expected(r, e))
        for a, r, e in CUTS
    ],
    *[(f"a lone max read as {a} sigma", body({"max": f"{a} mV"}, max_sigmas=a), expected(r, e)) for a, r, e in CUTS],
    *[
        (f"typ as two sigma, cut at {a} sigma", body({"typ": "2 mV", "max": f"{a} mV"}, typ_sigmas=2), expected(r, e))
        for a, r, e in CUTS[1:]
    ],
]
