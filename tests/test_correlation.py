"""Correlation: one cause at +-1, a Gaussian copula in between."""

from __future__ import annotations

import numpy as np
import pytest


def chain(sources: list[dict], pairs: list[tuple[str, str, float]], **more) -> dict:
    """One source a stage, gain 1 each."""
    stages = [
        {"name": f"s{i}", "gain": 1, "sources": [{"name": "e", "effect": "offset", **source}]}
        for i, source in enumerate(sources)
    ]
    correlations = [{"between": [f"{a}/e", f"{b}/e"], "coefficient": c} for a, b, c in pairs]
    return {"input": {"unit": "V", "values": [0]}, "stages": stages, "correlations": correlations, **more}


def test_minus_one_of_equal_causes_cancels(post):
    point = post("/v1/budget", chain([{"max": 1}, {"max": 1}], [("s0", "s1", -1)]))["points"][0]
    assert point["worst_case"] == {"lower": 0, "upper": 0, "first_order": {"lower": 0, "upper": 0}}
    assert point["rss"]["sigma"] == 0
    assert point["monte_carlo"]["sigma"] == pytest.approx(0, abs=1e-12)


def test_a_ratiometric_chain_cancels_in_the_worst_case_too(post):
    """Excitation and reference are one cause: + in the sensor's gain, - in the converter's."""
    body = {
        "input": {"unit": "V", "values": [1]},
        "stages": [
            {"name": "bridge", "gain": 1, "sources": [{"name": "excitation", "effect": "gain", "max": "1 %"}]},
            {"name": "converter", "gain": 1, "sources": [{"name": "reference", "effect": "gain", "max": "1 %"}]},
        ],
        "correlations": [{"between": ["bridge/excitation", "converter/reference"], "coefficient": -1}],
    }
    point = post("/v1/budget", body)["points"][0]
    # (1 + g)(1 - g) - 1 = -g^2: nothing in first order, and never above zero
    assert point["worst_case"]["first_order"] == {"lower": 0, "upper": 0}
    assert point["worst_case"]["lower"] == pytest.approx(-1e-4, rel=1e-9)
    assert point["worst_case"]["upper"] == pytest.approx(0, abs=1e-12)
    assert point["monte_carlo"]["lower"] >= point["worst_case"]["lower"]
    assert point["monte_carlo"]["upper"] <= 1e-12


def test_plus_one_adds_linearly(post):
    """JCGM 100:2008, 5.2.2: fully correlated inputs add as their magnitudes."""
    point = post("/v1/budget", chain([{"typ": 1}, {"typ": 2}], [("s0", "s1", 1)]))["points"][0]
    assert point["rss"]["sigma"] == pytest.approx(3, rel=1e-12)
    assert point["monte_carlo"]["sigma"] == pytest.approx(3, rel=0.01)


@pytest.mark.parametrize("rho", [-0.7, 0.3, 0.9])
def test_partly_correlated_normal_sources_follow_the_law_of_propagation(post, rho):
    """u^2 = u1^2 + u2^2 + 2 r u1 u2 (JCGM 100:2008, 5.2.2)."""
    point = post("/v1/budget", chain([{"typ": 1}, {"typ": 2}], [("s0", "s1", rho)]))["points"][0]
    expected = np.sqrt(1 + 4 + 2 * rho * 2)
    assert point["rss"]["sigma"] == pytest.approx(expected, rel=1e-12)
    assert point["monte_carlo"]["sigma"] == pytest.approx(expected, rel=0.01)
    assert point["worst_case"]["upper"] == pytest.approx(9)


@pytest.mark.parametrize("rho", [-0.8, 0.5, 0.95])
def test_uniform_sources_have_the_covariance_of_their_copula(post, rho):
    """Pearson's coefficient of a Gaussian copula with uniform margins is (6 / pi) asin(rho / 2) (Kruskal 1958, from memory)."""
    point = post("/v1/budget", chain([{"max": 1}, {"max": 1}], [("s0", "s1", rho)]))["points"][0]
    pearson = 6 / np.pi * np.arcsin(rho / 2)
    assert point["rss"]["sigma"] == pytest.approx(np.sqrt((2 + 2 * pearson) / 3), rel=1e-9)


@pytest.mark.parametrize("rho", [-0.8, 0.5, 0.9])
def test_two_point_sources_have_the_covariance_of_their_copula(post, rho):
    """Signs of two normal values agree with probability 1/2 + asin(rho) / pi (Sheppard 1899, from memory)."""
    sources = [{"max": 1, "shape": "two_point"}, {"max": 1, "shape": "two_point"}]
    point = post("/v1/budget", chain(sources, [("s0", "s1", rho)]))["points"][0]
    pearson = 2 / np.pi * np.arcsin(rho)
    assert point["rss"]["sigma"] == pytest.approx(np.sqrt(2 + 2 * pearson), rel=2e-3)


@pytest.mark.parametrize("rho", [-1, -0.6, 0.6, 1])
def test_sources_of_different_shape_agree_between_rss_and_simulation(post, rho):
    body = chain([{"max": 1}, {"typ": 1, "max": 2}], [("s0", "s1", rho)], monte_carlo={"trials": 400_000})
    point = post("/v1/budget", body)["points"][0]
    sigma = point["rss"]["sigma"]
    assert point["monte_carlo"]["sigma"] == pytest.approx(sigma, rel=6 / np.sqrt(800_000))
    assert point["worst_case"]["lower"] - 1e-9 <= point["monte_carlo"]["lower"]
    assert point["monte_carlo"]["upper"] <= point["worst_case"]["upper"] + 1e-9


def test_correlated_readings_are_correlated_in_the_same_reading(post):
    sources = [{"typ": 1, "varies_by": "reading"}, {"typ": 1, "varies_by": "reading"}]
    body = chain(sources, [("s0", "s1", 0.5)], readings_averaged=4, monte_carlo={"trials": 100_000})
    point = post("/v1/budget", body)["points"][0]
    assert point["rss"]["sigma"] == pytest.approx(np.sqrt(3 / 4), rel=1e-12)
    assert point["monte_carlo"]["sigma"] == pytest.approx(np.sqrt(3 / 4), rel=0.02)


def test_sources_tied_to_one_cause_share_its_partial_correlations(post):
    """s0 and s1 are one cause; its 0.5 with s2 needn't be stated twice."""
    body = chain([{"typ": 1}] * 3, [("s0", "s1", 1), ("s1", "s2", 0.5)])
    assert post("/v1/budget", body)["points"][0]["rss"]["sigma"] == pytest.approx(np.sqrt(4 + 1 + 2), rel=1e-12)


def test_covariance_shares_add_up_to_one(post):
    body = chain([{"typ": 1}, {"typ": 2}, {"max": 1}], [("s0", "s1", -0.9)], methods=["rss"])
    shares = [row["variance_share"] for row in post("/v1/budget", body)["contributions"]]
    assert sum(shares) == pytest.approx(1, rel=1e-12)


@pytest.mark.parametrize(
    ("pairs", "pointer", "words"),
    [
        ([("s0", "s1", 0.9), ("s1", "s2", 0.9), ("s0", "s2", -0.9)], "#/correlations/2", "semidefinite"),
        ([("s0", "s1", 1), ("s1", "s2", 1), ("s0", "s2", -1)], "#/correlations/2", "contradicts"),
        ([("s0", "s0", 0.5)], "#/correlations/0/between", "same source"),
        ([("s0", "s1", 0.5), ("s1", "s0", 0.5)], "#/correlations/1/between", "stands before"),
        ([("s0", "nowhere", 0.5)], "#/correlations/0/between/1", "no source"),
    ],
)
def test_impossible_correlations_are_refused_where_they_stand(client, pairs, pointer, words):
    response = client.post("/v1/budget", json=chain([{"typ": 1}] * 3, pairs))
    assert response.status_code == 422
    faults = {error["pointer"]: error["detail"] for error in response.get_json()["errors"]}
    assert words in faults[pointer]


def test_a_unit_and_a_reading_source_cannot_be_correlated(client):
    body = chain([{"typ": 1}, {"typ": 1, "varies_by": "reading"}], [("s0", "s1", 0.5)])
    response = client.post("/v1/budget", json=body)
    assert response.status_code == 422
    assert response.get_json()["errors"][0]["pointer"] == "#/correlations/0/between"
