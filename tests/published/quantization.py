"""Converters: quantization noise, size of a step, and the drift that a reference may have."""

from math import log10, sqrt

SOURCE = (
    "Bennett 1948 and MT-001, Analog Devices: 6.02 N + 1.76 dB; reference drift: MT-087, Analog Devices, table "
    "(from memory; recomputed); steps of a 4.096 V converter: application note 3998, Maxim, 8 March 2007 (read in a copy)"
)


def body(unit, full_scale, source, **more):
    """Build a converter at full scale."""
    source = {"name": "x", **source}
    return {
        "input": {"unit": unit, "values": [full_scale]},
        "stages": [{"name": "converter", "gain": 1, "full_scale": f"{full_scale} {unit}", "sources": [source]}],
        "methods": ["worst_case", "rss"],
        **more,
    }


def step(bits):
    """Half a step as a part of full scale."""
    return {"effect": "nonlinearity", "max": 1 / 2 ** (bits + 1), "shape": "uniform", "varies_by": "reading"}


def snr(sigma):
    """Ratio of the rms value of a sine that spans 1 V peak to peak to the noise, dB."""
    return 20 * log10(1 / sqrt(8) / sigma)


def drift(ppm_per_kelvin):
    """Give a reference and its temperature, 100 K from nominal."""
    temperature = {"temperature": {"nominal": "25 degC", "values": ["125 degC"]}}
    source = {"effect": "gain", "per": "temperature", "max": f"{ppm_per_kelvin} ppm/K"}
    return source, temperature


SIGMA, BOUND = "points.0.rss.sigma", "points.0.worst_case.first_order.upper"

DRIFTS = [(8, 19.53), (9, 9.77), (10, 4.88), (11, 2.44), (12, 1.22), (13, 0.61), (14, 0.31), (15, 0.15), (16, 0.08)]

CASES = [
    *[
        (f"noise of {n} bits", body("V", 1, step(n)), [(SIGMA, 6.02 * n + 1.76, tol, "dB", snr)])
        for n, tol in ((8, 0.01), (12, 0.02), (16, 0.02))  # the printed 6.02 is 6.0206
    ],
    ("noise of 12 bits as printed", body("V", 1, step(12)), [(SIGMA, 74.0, 0.05, "dB", snr)]),
    ("noise of 16 bits as printed", body("V", 1, step(16)), [(SIGMA, 98.1, 0.05, "dB", snr)]),
    (
        "q / sqrt 12",
        body("mV", 1, {"effect": "offset", "max": "0.5 mV", "shape": "uniform", "varies_by": "reading"}),
        [(SIGMA, 0.2887, 0.00005, "of the step")],
    ),
    (
        "step of 8 bits at 4.096 V",
        body("mV", 4096, step(8)),
        [(BOUND, 8, 1e-9, "mV, half a step"), (BOUND, 16, 1e-9, "mV, a step", lambda half: 2 * half)],
    ),
    (
        "step of 12 bits at 4.096 V",
        body("mV", 4096, step(12)),
        [(BOUND, 1, 1e-9, "mV, a step", lambda half: 2 * half)],
    ),
    *[
        (
            f"drift of {ppm} ppm/K over 100 K is half a step of {bits} bits (1 mV a step)",
            body("mV", 2**bits, drift(ppm)[0], conditions=drift(ppm)[1]),
            [(BOUND, 0.5, 0.0051e-4 * 2**bits, "steps; the printed ppm/K is rounded to 0.01")],
        )
        for bits, ppm in DRIFTS
    ],
]
