"""What must not change an answer, and what must change it by a known factor."""

from __future__ import annotations

import copy

import numpy as np
import pytest

METHODS = {"methods": ["worst_case", "rss"]}


def numbers(answer: dict) -> list[float]:
    """All error figures of an answer, in order."""
    rows = []
    for point in answer["points"]:
        worst, rss = point["worst_case"], point["rss"]
        rows += [worst["lower"], worst["upper"], worst["first_order"]["upper"], rss["mean"], rss["sigma"], rss["upper"]]
    return rows


@pytest.fixture
def chain(example) -> dict:
    example.update(METHODS)
    del example["limit"]
    return example


def test_scaling_units_changes_nothing(post, chain):
    """The same chain written in mbar, mV/mbar and nV: the same errors in mbar are a thousand times the ones in bar."""
    scaled = copy.deepcopy(chain)
    scaled["input"] = {"unit": "mbar", "values": [0, 5000, 10000]}
    scaled["stages"][0]["gain"] = "2 uV/mbar"
    scaled["stages"][1]["sources"][0] |= {"typ": "12000 nV", "max": "0.05 mV"}
    scaled["calibration"]["points"] = [{"input": "0 bar"}, {"input": "10 bar"}]
    once, again = post("/v1/budget", chain), post("/v1/budget", scaled)
    assert again["unit"] == "mbar"
    assert numbers(again) == pytest.approx([1000 * value for value in numbers(once)], rel=1e-10, abs=1e-15)


@pytest.mark.parametrize("node", ["input", "bridge", "amplifier", "output"])
def test_referring_to_any_node_differs_by_the_gain(post, chain, node):
    """Gains of the example: 2 mV/bar, 100, 1; answers are in bar and mV."""
    gain = {"input": 1.0, "bridge": 2.0, "amplifier": 200.0, "output": 200.0}[node]
    at_input = post("/v1/budget", chain)
    referred = post("/v1/budget", chain | {"refer_to": node})
    assert numbers(referred) == pytest.approx([gain * value for value in numbers(at_input)], rel=1e-10, abs=1e-15)


def test_splitting_off_a_stage_of_gain_one_changes_nothing(post, chain):
    split = copy.deepcopy(chain)
    amplifier = split["stages"][1]
    moved = amplifier["sources"].pop(0)
    split["stages"].insert(1, {"name": "front", "gain": 1, "sources": [moved]})
    assert numbers(post("/v1/budget", split)) == pytest.approx(numbers(post("/v1/budget", chain)), rel=1e-10, abs=1e-15)


def test_the_order_of_a_stages_sources_does_not_matter(post, chain):
    turned = copy.deepcopy(chain)
    for stage in turned["stages"]:
        stage["sources"].reverse()
    assert numbers(post("/v1/budget", turned)) == pytest.approx(
        numbers(post("/v1/budget", chain)), rel=1e-10, abs=1e-15
    )


def test_a_negative_gain_mirrors_the_error(post):
    def answer(gain: float) -> dict:
        source = {"name": "e", "effect": "offset", "min": -1, "max": 3}
        body = {
            "input": {"unit": "V", "values": [1]},
            "stages": [{"name": "s", "gain": gain, "sources": [source]}],
            **METHODS,
        }
        return post("/v1/budget", body)["points"][0]

    plus, minus = answer(2), answer(-2)
    assert minus["worst_case"]["lower"] == -plus["worst_case"]["upper"] == -6
    assert minus["rss"]["mean"] == -plus["rss"]["mean"] == -2


def test_the_same_request_gives_the_same_bytes(client, example):
    bodies = {client.post("/v1/budget", json=example).get_data() for _ in range(2)}
    assert len(bodies) == 1


def test_shares_add_up_to_one(post, example):
    answer = post("/v1/budget", example)
    rows = answer["contributions"]
    assert sum(row["variance_share"] for row in rows) == pytest.approx(1, rel=1e-12)
    assert sum(row["bound_share"] for row in rows) == pytest.approx(1, rel=1e-12)
    shares = [row["variance_share"] for row in rows]
    assert shares == sorted(shares, reverse=True)
    governing = answer["points"][answer["governing_point"]]
    total = sum(row["contribution_sigma"] ** 2 for row in rows)
    assert np.sqrt(total) == pytest.approx(governing["rss"]["sigma"], rel=1e-12)
    assert answer["variance_parts"]["unit"] + answer["variance_parts"]["reading"] == pytest.approx(1, rel=1e-12)
