"""Random chains: first-order standard deviations against a general error-propagation library."""

import random
from itertools import pairwise
from math import prod

import uncertainties

SOURCE = (
    "the library `uncertainties` applied to the exact chain formula, and to the two-point correction of the reading"
)

RELATIVE = 1e-9
TEMPERATURE_STEP = 45.0  # K, 25 to 70 degC


def random_source(rng, name):
    """Build one normal source; relative ones are small, so that no gain can reach zero."""
    effect = rng.choice(["offset", "offset", "gain", "nonlinearity"])
    sigma = rng.uniform(0.1, 1.0) * (1e-2 if effect == "offset" else 1e-3)
    source = {"name": name, "effect": effect, "shape": "normal"}
    if effect == "offset" and rng.random() < 0.5:
        source["at"] = "output"
    if effect != "nonlinearity" and rng.random() < 0.5:
        typ = f"{sigma / 10!r} V/K" if effect == "offset" else f"{sigma * 1e5!r} ppm/K"
        return {**source, "per": "temperature", "typ": typ}, sigma / 10
    return {**source, "typ": sigma}, sigma


def random_chain(rng):
    """Build the stages, and the standard deviations of their sources, in the order in which they stand."""
    stages, sigmas = [], []
    for i in range(rng.randint(1, 4)):
        drawn = [random_source(rng, f"s{j}") for j in range(rng.randint(2, 4))]
        sigmas += [sigma for _, sigma in drawn]
        stages.append(
            {
                "name": f"stage {i}",
                "gain": rng.choice([-1, 1]) * rng.uniform(0.2, 20),
                "full_scale": rng.uniform(1, 10),
                "sources": [source for source, _ in drawn],
            }
        )
    # one source that no calibration removes
    stages[0]["sources"].append({"name": "bend", "effect": "nonlinearity", "shape": "normal", "typ": 1e-3})
    sigmas.insert(len(stages[0]["sources"]) - 1, 1e-3)
    return stages, sigmas


def reading(stages, errors, x, step, bent=True):
    """Propagate ``x`` through the built unit; at a calibration point there is no nonlinearity (``bent`` is false)."""
    u, errors = x, iter(errors)
    for stage in stages:
        a = b = g = 0.0
        for source in stage["sources"]:
            e = next(errors) * (step if "per" in source else 1.0)
            if source["effect"] == "gain":
                g = g + e
            elif source["effect"] == "nonlinearity":
                b = b + (e * stage["full_scale"] if bent else 0.0)
            elif source.get("at") == "output":
                b = b + e
            else:
                a = a + e
        u = stage["gain"] * (1 + g) * (u + a) + b
    return u


def two_point(r, r1, r2, v1, v2):
    """Correct a reading by the straight line through two calibration points."""
    return v1 + (r - r1) * (v2 - v1) / (r2 - r1)


def correlated_errors(rng, stages, sigmas):
    """Build the errors, one neighbouring pair of them correlated, and the request's words for it."""
    names = [f"{stage['name']}/{source['name']}" for stage in stages for source in stage["sources"]]
    i, j = rng.choice(list(pairwise(range(len(names)))))
    r = rng.uniform(-0.9, 0.9)
    C = [[s * t * (1.0 if m == n else 0.0) for n, t in enumerate(sigmas)] for m, s in enumerate(sigmas)]
    C[i][j] = C[j][i] = r * sigmas[i] * sigmas[j]
    errors = uncertainties.correlated_values([0.0] * len(sigmas), C)
    return errors, [{"between": [names[i], names[j]], "coefficient": r}]


def case(seed):
    """Build one chain at three input values, 45 K from nominal; odd seeds are calibrated at 0 V and 1 V."""
    rng = random.Random(seed)
    stages, sigmas = random_chain(rng)
    errors, correlations = correlated_errors(rng, stages, sigmas)
    inputs = [rng.uniform(-1, 1) for _ in range(3)]
    gain = prod(stage["gain"] for stage in stages)
    calibrated, at_input = seed % 2 == 1, seed % 3 == 0
    rows = []
    for k, x in enumerate(inputs):
        y = reading(stages, errors, x, TEMPERATURE_STEP)
        if calibrated:
            r1, r2 = (reading(stages, errors, c, 0.0, bent=False) for c in (0.0, 1.0))
            y = two_point(y, r1, r2, 0.0, gain)
        sigma = y.std_dev / (abs(gain) if at_input else 1.0)
        rows.append((f"points.{k}.rss.sigma", sigma, RELATIVE * sigma, "V"))
    body = {
        "input": {"unit": "V", "values": inputs},
        "conditions": {"temperature": {"nominal": "25 degC", "values": ["70 degC"]}},
        "stages": stages,
        "correlations": correlations,
        "refer_to": "input" if at_input else "output",
        "methods": ["rss"],
    }
    if calibrated:
        body["calibration"] = {"points": [{"input": 0}, {"input": 1}]}
    return f"seed {seed}", body, rows


CASES = [case(seed) for seed in range(12)]
