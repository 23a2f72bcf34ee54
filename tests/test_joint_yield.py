"""Joint yield at ppm level: importance sampling against exact laws and against plain counting."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy import stats


def chain(sources: list[dict], inputs: list[float], limit: dict, **more) -> dict:
    named = [{"name": f"e{i}", **source} for i, source in enumerate(sources)]
    return {
        "input": {"unit": "V", "values": inputs},
        "stages": [{"name": "s", "gain": 1, "full_scale": 1, "sources": named}],
        "limit": limit,
        "methods": ["rss", "monte_carlo", "convolution"],
        **more,
    }


def joint(post, body: dict, seed: int = 1, trials: int = 1000, sampling: str = "auto") -> dict:
    spec = {"trials": trials, "seed": seed, "sampling": sampling}
    return post("/v1/budget", body | {"monte_carlo": spec})["monte_carlo"]


def test_one_normal_source_has_its_tail(post):
    """Normal table: 63.342 ppm outside 4 sigma, 0.57330 ppm outside 5 (common tables; recomputed with scipy)."""
    for k in (4, 5):
        found = joint(post, chain([{"effect": "offset", "typ": 1}], [0], {"max": k}))
        exact = 2 * stats.norm.sf(k)
        assert found["sampling"] == "importance"
        assert 1 - found["joint_yield"] == pytest.approx(exact, rel=0.02)
        low, high = (1 - y for y in reversed(found["joint_yield_interval"]))
        assert low * 0.97 < exact < high * 1.03
        assert found["effective_trials"] > 1e7


MIXED = [
    {"effect": "offset", "typ": 1, "max": 3},
    {"effect": "offset", "max": 2},
    {"effect": "offset", "max": 1, "shape": "triangular"},
    {"effect": "offset", "max": 1, "shape": "trapezoidal"},
    {"effect": "offset", "max": 1, "shape": "two_point"},
    {"effect": "offset", "max": 1, "shape": "arcsine"},
    {"effect": "offset", "typ": 0.3, "varies_by": "reading"},
]


def test_every_shape_agrees_with_its_exact_law(post):
    """A linear chain at one point: convolution knows the share outside."""
    body = chain(MIXED, [0], {"max": 5.5})
    exact = post("/v1/budget", body)["points"][0]["convolution"]["outside_ppm"]
    found = joint(post, body)
    assert 1e6 * (1 - found["joint_yield"]) == pytest.approx(exact, rel=0.03)


def test_the_interval_covers_the_truth_as_often_as_it_says(post):
    """Sixty seeds on the linear chain above with unsymmetrical limits: 95 % intervals miss 0 to 9 times (p > 0.999)."""
    body = chain(MIXED, [0], {"min": -5.2, "max": 6})
    exact = post("/v1/budget", body)["points"][0]["convolution"]["outside_ppm"] / 1e6
    missed = 0
    for seed in range(60):
        low, high = (1 - y for y in reversed(joint(post, body, seed)["joint_yield_interval"]))
        missed += not low <= exact <= high
    assert missed <= 9


def test_points_are_joined_as_one_unit(post):
    """Two inputs, one offset and one gain: outside at either; counted plainly with numpy on the same chain."""
    body = chain(
        [{"effect": "offset", "typ": 1}, {"effect": "gain", "typ": "10 %", "max": "60 %"}], [0, 10], {"max": 4.2}
    )
    found = joint(post, body)
    rng = np.random.default_rng(11)
    a = rng.standard_normal(8_000_000)
    g = 0.1 * stats.truncnorm.ppf(rng.random(8_000_000), -6, 6)
    at_ten = (1 + g) * (10 + a) - 10
    # at input 0 the gain error acts on the offset
    plain = np.mean((np.abs(a * (1 + g)) > 4.2) | (np.abs(at_ten) > 4.2))
    error = 5 * math.sqrt(plain / 8_000_000)
    assert 1 - found["joint_yield"] == pytest.approx(plain, abs=error + 0.02 * plain)


def test_plain_counting_stays_available_and_is_said(post):
    body = chain([{"effect": "offset", "typ": 1}], [0], {"max": 4})
    found = joint(post, body, trials=20_000, sampling="plain")
    assert found["sampling"] == "plain"
    assert found["effective_trials"] == 20_000


def test_what_is_not_rare_is_counted(post):
    assert joint(post, chain([{"effect": "offset", "typ": 1}], [0], {"max": 1}))["sampling"] == "plain"


def test_calibration_and_correlation_leave_the_estimate_unbiased(post):
    """Calibrated at two points, correlated sources, averaged readings: importance against 4e6 plain trials."""
    body = chain(
        [
            {"effect": "offset", "per": "temperature", "typ": "0.03 V/K", "max": "0.12 V/K"},
            {"effect": "gain", "per": "temperature", "typ": "0.1 %/K", "max": "0.3 %/K"},
            {"effect": "nonlinearity", "max": 0.4},
            {"effect": "offset", "typ": 0.3, "varies_by": "reading"},
        ],
        [0, 5, 10],
        {"max": 4.3},
        conditions={"temperature": {"nominal": "25 degC", "values": ["65 degC"]}},
        calibration={"points": [{"input": 0}, {"input": 10}], "readings_averaged": 4},
        correlations=[{"between": ["s/e0", "s/e1"], "coefficient": 0.4}],
        methods=["rss", "monte_carlo"],
    )
    plain = joint(post, body, trials=1_000_000, sampling="plain")
    found = joint(post, body)
    assert found["sampling"] == "importance"
    low, high = plain["joint_yield_interval"]
    wider = 2 * (high - low)
    assert low - wider <= found["joint_yield"] <= high + wider
