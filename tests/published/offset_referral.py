"""Input and output offset of an amplifier, referred to its output."""

SOURCE = (
    "AD624 data sheet, input offset and output offset, p. 7, and MT-064, Analog Devices (read in copies; recomputed)"
)


def body(gain, *sources, methods=("rss",)):
    """One amplifier with its input at zero."""
    return {
        "input": {"unit": "uV", "values": [0]},
        "stages": [{"name": "amplifier", "gain": gain, "sources": list(sources)}],
        "refer_to": "output",
        "methods": list(methods),
    }


# signed offsets of one unit: the mean carries the sign, the spread is nothing but a formality
OUTPUT = {"name": "output", "effect": "offset", "at": "output", "mean": "250 uV", "typ": "1 nV", "shape": "normal"}
INPUT = {"name": "input", "effect": "offset", "mean": "-50 uV", "typ": "1 nV", "shape": "normal"}

CASES = [
    ("+250 uV out, -50 uV in, gain 1", body(1, OUTPUT, INPUT), [("points.0.rss.mean", 200, 1e-9, "uV")]),
    (
        "+250 uV out, -50 uV in, gain 100",
        body(100, OUTPUT, INPUT),
        [("points.0.rss.mean", -4.75, 1e-9, "mV", lambda microvolts: microvolts / 1e3)],
    ),
    (
        "0.5 mV at gain 10000 is 5 V",
        body(10000, {"name": "input", "effect": "offset", "max": "0.5 mV"}, methods=("worst_case",)),
        [
            ("points.0.worst_case.upper", 5, 1e-9, "V", lambda microvolts: microvolts / 1e6),
            ("points.0.worst_case.lower", -5, 1e-9, "V", lambda microvolts: microvolts / 1e6),
        ],
    ),
]
