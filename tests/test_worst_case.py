"""Worst case: exact extremes of the chain; nothing that is drawn leaves them."""

from __future__ import annotations

import itertools

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

BOUNDED = ("uniform", "triangular", "arcsine", "two_point", "truncated_normal", "trapezoidal")


@st.composite
def sources(draw, name: str) -> dict:
    effect = draw(st.sampled_from(["offset", "gain", "nonlinearity"]))
    size = draw(st.floats(1e-4, 0.05))
    source = {
        "name": name,
        "effect": effect,
        "max": size,
        "shape": draw(st.sampled_from(BOUNDED)),
        "varies_by": draw(st.sampled_from(["unit", "reading"])),
    }
    if effect == "offset":
        source["at"] = draw(st.sampled_from(["input", "output"]))
    if draw(st.booleans()):
        source["per"], source["max"] = "temperature", f"{size / 50} V/K" if effect == "offset" else f"{size / 50} 1/K"
    return source


@st.composite
def chains(draw) -> dict:
    stages = [
        {
            "name": f"s{i}",
            "gain": draw(st.sampled_from([0.5, 1, 2, -3, 10])),
            "sources": [draw(sources(f"e{j}")) for j in range(draw(st.integers(1, 3)))],
        }
        for i in range(draw(st.integers(1, 3)))
    ]
    body = {
        "input": {"unit": "V", "values": [0.5, 1, 2]},
        "conditions": {"temperature": {"nominal": "25 degC", "values": ["-20 degC", "60 degC"]}},
        "stages": stages,
        "monte_carlo": {"trials": 2000, "seed": draw(st.integers(0, 2**31))},
        "readings_averaged": draw(st.sampled_from([1, 3])),
        "refer_to": draw(st.sampled_from(["input", "output", "s0"])),
        "methods": ["worst_case", "monte_carlo"],
    }
    if draw(st.booleans()):
        points = [{"input": 0.5}, {"input": 2}][: draw(st.integers(1, 2))]
        body["calibration"] = {"points": points, "readings_averaged": draw(st.sampled_from([1, 4]))}
    return body


QUICK = settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])


@QUICK
@given(body=chains())
def test_no_trial_of_bounded_sources_leaves_the_worst_case(post, body):
    answer = post("/v1/budget", body)
    for point in answer["points"]:
        worst, drawn = point["worst_case"], point["monte_carlo"]
        slack = 1e-9 * (worst["upper"] - worst["lower"]) + 1e-13  # rounding of signals of some volts
        assert worst["lower"] - slack <= drawn["lower"] <= drawn["upper"] <= worst["upper"] + slack
    edges = answer["monte_carlo"]["histogram"]["edges"]
    counts = answer["monte_carlo"]["histogram"]["counts"]
    assert sum(counts) == 2000
    worst = answer["points"][answer["governing_point"]]["worst_case"]
    bin_width = (edges[-1] - edges[0]) / len(counts)
    assert worst["lower"] - bin_width - 1e-13 <= edges[0]
    assert edges[-1] <= worst["upper"] + bin_width + 1e-13


@QUICK
@given(body=chains())
def test_the_exact_worst_case_is_near_the_first_order_sum_for_small_errors(post, body):
    body["methods"] = ["worst_case"]
    for stage in body["stages"]:
        for source in stage["sources"]:
            for member in ("max",):
                value = source[member]
                source[member] = (
                    value * 1e-6
                    if not isinstance(value, str)
                    else f"{float(value.split()[0]) * 1e-6} {value.split()[1]}"
                )
    for point in post("/v1/budget", body)["points"]:
        worst = point["worst_case"]
        assert worst["lower"] == pytest.approx(worst["first_order"]["lower"], rel=1e-4, abs=1e-18)
        assert worst["upper"] == pytest.approx(worst["first_order"]["upper"], rel=1e-4, abs=1e-18)


def deviation(gains, x, offsets, gain_errors):
    """The chain written out plainly: u = G (1 + g) (u + a)."""
    u = x
    for gain, a, g in zip(gains, offsets, gain_errors, strict=True):
        u = gain * (1 + g) * (u + a)
    return u - x * np.prod(gains)


@pytest.mark.parametrize("gains", [(2, 3), (-2, 3), (0.5, -4)])
def test_the_extremes_are_those_of_all_corners(post, gains):
    """Brute force over all 2^4 corners of the plainly written chain."""
    a, g, x = (0.01, 0.02), (0.03, 0.05), 1.5
    body = {
        "input": {"unit": "V", "values": [x]},
        "stages": [
            {
                "name": f"s{i}",
                "gain": gains[i],
                "sources": [
                    {"name": "a", "effect": "offset", "max": a[i]},
                    {"name": "g", "effect": "gain", "max": g[i]},
                ],
            }
            for i in range(2)
        ],
        "methods": ["worst_case"],
    }
    corners = [
        deviation(gains, x, (s0 * a[0], s1 * a[1]), (s2 * g[0], s3 * g[1]))
        for s0, s1, s2, s3 in itertools.product((-1, 1), repeat=4)
    ]
    worst = post("/v1/budget", body)["points"][0]["worst_case"]
    assert worst["lower"] == pytest.approx(min(corners), rel=1e-12)
    assert worst["upper"] == pytest.approx(max(corners), rel=1e-12)


def test_a_calibrated_chain_has_the_extremes_of_all_corners(post):
    """Two-point correction of the reading, written out plainly, over all corners."""
    a, g, drift, inputs = 0.05, 0.04, 0.002, [0.0, 1.0, 2.0]
    body = {
        "input": {"unit": "V", "values": inputs},
        "conditions": {"temperature": {"nominal": "25 degC", "values": ["65 degC"]}},
        "stages": [
            {
                "name": "s",
                "gain": 2,
                "sources": [
                    {"name": "a", "effect": "offset", "max": a},
                    {"name": "g", "effect": "gain", "max": g},
                    {"name": "drift", "effect": "gain", "per": "temperature", "max": f"{drift} 1/K"},
                ],
            }
        ],
        "calibration": {"points": [{"input": 0}, {"input": 2}]},
        "methods": ["worst_case"],
    }
    for point in post("/v1/budget", body)["points"]:
        errors = []
        for s in itertools.product((-1, 1), repeat=3):
            cold = [2 * (1 + s[1] * g) * (x + s[0] * a) for x in (0.0, 2.0)]
            hot = 2 * (1 + s[1] * g + 40 * s[2] * drift) * (point["input"] + s[0] * a)
            errors.append(4.0 * (hot - cold[0]) / (cold[1] - cold[0]) - 2 * point["input"])
        assert point["worst_case"]["upper"] == pytest.approx(max(errors), rel=1e-9, abs=1e-12)
        assert point["worst_case"]["lower"] == pytest.approx(min(errors), rel=1e-9, abs=1e-12)
