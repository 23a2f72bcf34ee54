"""Calibration at one and two points: what it removes, what it leaves, what it adds."""

from __future__ import annotations

import numpy as np
import pytest


def chain(sources: list[dict], points: list[dict], **more) -> dict:
    named = [{"name": f"e{i}", **source} for i, source in enumerate(sources)]
    return {
        "input": {"unit": "V", "values": [0, 1, 2]},
        "conditions": {"temperature": {"nominal": "25 degC", "values": ["25 degC", "65 degC"]}},
        "stages": [{"name": "s", "gain": 2, "full_scale": 4, "sources": named}],
        "calibration": {"points": points},
        "refer_to": "input",
        **more,
    }


OFFSET, GAIN = {"effect": "offset", "max": 0.1}, {"effect": "gain", "max": "1 %"}
DRIFT = {"effect": "offset", "per": "temperature", "max": "1 mV/K"}


def sigmas(answer: dict) -> list[float]:
    return [point["rss"]["sigma"] for point in answer["points"]]


def test_one_point_removes_offset(post):
    answer = post("/v1/budget", chain([OFFSET], [{"input": 0}]))
    assert sigmas(answer) == pytest.approx([0] * 6, abs=1e-15)
    assert all(point["worst_case"]["upper"] == pytest.approx(0, abs=1e-15) for point in answer["points"])


def test_two_points_remove_offset_and_gain(post):
    answer = post("/v1/budget", chain([OFFSET, GAIN], [{"input": 0}, {"input": 2}]))
    assert sigmas(answer) == pytest.approx([0] * 6, abs=1e-15)
    assert all(point["monte_carlo"]["sigma"] == pytest.approx(0, abs=1e-12) for point in answer["points"])


def test_drift_stays_away_from_the_temperature_of_calibration(post):
    """Removed where calibration is at the nominal temperature; 40 K away 40 mV / sqrt 3 are left."""
    answer = post("/v1/budget", chain([DRIFT], [{"input": 0}]))
    assert sigmas(answer) == pytest.approx([0, 0.04 / np.sqrt(3)] * 3, abs=1e-15)


def test_calibrating_at_another_temperature_moves_the_drift(post):
    points = [{"input": 0, "conditions": {"temperature": "65 degC"}}]
    assert sigmas(post("/v1/budget", chain([DRIFT], points))) == pytest.approx([0.04 / np.sqrt(3), 0] * 3, abs=1e-15)


def test_nonlinearity_is_not_removed(post):
    source = {"effect": "nonlinearity", "max": "0.1 %"}
    answer = post("/v1/budget", chain([source], [{"input": 0}, {"input": 2}]))
    assert sigmas(answer) == pytest.approx([0.002 / np.sqrt(3)] * 6, rel=1e-12)


@pytest.mark.parametrize(("readings", "share"), [(1, 1.0), (4, 0.25)])
def test_noise_comes_in_again_at_the_calibration_points(post, readings, share):
    """sigma^2 (1 + (w1^2 + w2^2) / readings), with weights 1-0, 1/2-1/2, 0-1 at the three inputs."""
    noise = {"effect": "offset", "typ": 0.001, "varies_by": "reading"}
    body = chain([noise], [{"input": 0}, {"input": 2}], monte_carlo={"trials": 100_000})
    body["calibration"]["readings_averaged"] = readings
    answer = post("/v1/budget", body)
    expected = 0.001 * np.sqrt(1 + share * np.array([1, 1, 0.5, 0.5, 1, 1]))
    assert sigmas(answer) == pytest.approx(expected, rel=1e-12)
    simulated = [point["monte_carlo"]["sigma"] for point in answer["points"]]
    assert simulated == pytest.approx(expected, rel=0.015)


@pytest.mark.parametrize(("common", "weights"), [(False, [1, 0.5, 1]), (True, [1, 1, 1])])
def test_the_standards_error_is_one_more_source(post, common, weights):
    """Its own at each point (squares of the weights add) or one in common (weights add)."""
    body = chain([DRIFT], [{"input": 0}, {"input": 2}])
    body["conditions"]["temperature"]["values"] = ["25 degC"]
    body["calibration"]["standard"] = {"typ": "1 mV", "common": common}
    answer = post("/v1/budget", body)
    assert sigmas(answer) == pytest.approx(0.001 * np.sqrt(weights), rel=1e-12)
    owners = {(row["stage"], row["source"]) for row in answer["contributions"]}
    assert ("calibration", "standard" if common else "standard at point 1") in owners


def test_the_simulation_corrects_the_reading_itself(post):
    """Mean of (r - r1) 4 / (r2 - r1) with a gain that drifts: the plain script, drawn with numpy."""
    sources = [
        {"effect": "gain", "max": "20 %", "shape": "uniform"},
        {"effect": "gain", "per": "temperature", "max": "0.2 %/K", "shape": "uniform"},
    ]
    body = chain(sources, [{"input": 0}, {"input": 2}], monte_carlo={"trials": 400_000})
    answer = post("/v1/budget", body)
    rng = np.random.default_rng(5)
    g, d = rng.uniform(-0.2, 0.2, 400_000), rng.uniform(-0.002, 0.002, 400_000) * 40
    error = 2 * (1 + g + d) / (1 + g) - 2  # input 2 V at 65 degC, referred to the input
    found = answer["points"][-1]["monte_carlo"]
    assert found["sigma"] == pytest.approx(error.std(), rel=0.01)
    assert found["mean"] == pytest.approx(error.mean(), abs=6 * error.std() / np.sqrt(400_000))
    assert found["sigma"] != pytest.approx(answer["points"][-1]["rss"]["sigma"], rel=0.01)  # the linear law is off here


@pytest.mark.parametrize(
    ("points", "pointer"),
    [
        ([{"input": 1}, {"input": 1}], "#/calibration/points/1/input"),
        ([{"input": 1, "conditions": {"humidity": 3}}], "#/calibration/points/0/conditions/humidity"),
        ([], "#/calibration/points"),
        ([{"input": 0}, {"input": 1}, {"input": 2}], "#/calibration/points"),
        ([{"input": 0}, {"input": "0.01 V"}], "#/calibration/points"),
    ],
)
def test_an_impossible_calibration_is_refused_where_it_stands(client, points, pointer):
    noise = {"effect": "offset", "max": 0.1, "varies_by": "reading"}
    response = client.post("/v1/budget", json=chain([noise], points))
    assert response.status_code == 422
    assert pointer in {error["pointer"] for error in response.get_json()["errors"]}
