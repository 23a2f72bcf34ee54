"""Limits in all their forms, the governing point, verdicts, and the check of rss."""

from __future__ import annotations

import pytest
from stagesum_server.engine.monte_carlo import numerical_tolerance


def chain(source: dict, **more) -> dict:
    stage = {"name": "s", "gain": 2, "sources": [{"name": "e", "effect": "offset", **source}]}
    return {"input": {"unit": "V", "values": [-1, 0, 3]}, "stages": [stage], **more}


@pytest.mark.parametrize(
    ("limit", "expected"),
    [
        ({"max": "10 mV"}, [(-0.01, 0.01)] * 3),
        ({"min": "-5 mV", "max": "20 mV"}, [(-0.005, 0.02)] * 3),
        ({"of_span": "1 %"}, [(-0.08, 0.08)] * 3),
        ({"of_reading": 0.01}, [(-0.02, 0.02), (0, 0), (-0.06, 0.06)]),
        ({"max": 0.01, "of_span": "0.1 %", "of_reading": "1 %"}, [(-0.038, 0.038), (-0.018, 0.018), (-0.078, 0.078)]),
    ],
)
def test_the_forms_of_a_limit_add_up(post, limit, expected):
    answer = post("/v1/budget", chain({"max": "1 mV"}, limit=limit, methods=["worst_case"]))
    found = [(point["limit"]["lower"], point["limit"]["upper"]) for point in answer["points"]]
    assert found == [pytest.approx(pair, abs=1e-15) for pair in expected]
    assert answer["span"] == 8


def test_the_governing_point_is_nearest_to_its_limit(post):
    answer = post("/v1/budget", chain({"max": "1 mV"}, limit={"max": 0.01, "of_reading": "1 %"}, methods=["rss"]))
    assert answer["governing_point"] == 1


def test_without_a_limit_the_largest_worst_case_governs_and_no_verdict_is_given(post):
    answer = post("/v1/budget", chain({"effect": "gain", "max": "1 %"}, methods=["worst_case", "rss"]))
    assert answer["governing_point"] == 2
    assert "verdict" not in answer
    assert "yield" not in answer["points"][0]["rss"]


def test_each_method_has_its_verdict(post):
    """Uniform +-10 mV, 90 % of the units to be inside +-9.5 mV: 95 % are, the normal law of the same sigma sees 90.04 %."""
    source = {"max": "10 mV", "at": "output"}
    verdict = post("/v1/budget", chain(source, limit={"max": "9.5 mV", "yield": 0.92}))["verdict"]
    assert verdict["worst_case"] == "fail"
    assert verdict["rss"] == "fail"
    assert verdict["monte_carlo"] == "pass"
    assert verdict["overall"] == "fail"
    assert verdict["by"] == ["rss", "monte_carlo", "convolution"]


def test_convolution_is_undecided_where_only_the_sum_over_points_is_too_large(post):
    """5 % outside at each of three points: alone each is within 10 %, together they may not be."""
    source = {"max": "10 mV", "at": "output"}
    limit = {"max": "9.5 mV", "yield": 0.9, "by": ["convolution"]}
    assert post("/v1/budget", chain(source, limit=limit))["verdict"]["convolution"] == "undecided"


def test_a_worst_case_outside_is_told_but_not_fatal(post):
    answer = post("/v1/budget", chain({"typ": "1 mV", "at": "output"}, limit={"max": "2.9 mV", "yield": 0.98}))
    assert answer["verdict"]["worst_case"] == "fail"
    assert answer["verdict"]["overall"] == "pass"


def test_a_worst_case_alone_decides(post):
    body = chain({"typ": "1 mV", "at": "output"}, limit={"max": "2.9 mV"}, methods=["worst_case"])
    assert post("/v1/budget", body)["verdict"]["overall"] == "fail"


def test_too_few_trials_leave_the_verdict_undecided(post):
    """Normal, limit at 3 sigma: yield 0.9973; 1000 trials can't tell it from 0.997."""
    limit = {"max": "3 mV", "yield": 0.997, "by": ["monte_carlo"]}
    plain = {"trials": 1000, "sampling": "plain"}
    answer = post("/v1/budget", chain({"typ": "1 mV", "at": "output"}, limit=limit, monte_carlo=plain))
    assert answer["verdict"]["monte_carlo"] == answer["verdict"]["overall"] == "undecided"


def test_capability_indices_follow_their_textbook_definitions(post):
    source = {"typ": "1 mV", "mean": "1 mV", "at": "output"}
    answer = post("/v1/budget", chain(source, limit={"max": "4 mV"}, methods=["rss"]))
    found = answer["points"][0]["rss"]
    assert (found["cp"], found["cpk"]) == (pytest.approx(8 / 6), pytest.approx(1))


def test_rss_limits_are_cut_at_the_worst_case(post):
    found = post("/v1/budget", chain({"max": "1 mV", "at": "output"}))["points"][0]["rss"]
    assert found["cut"]
    assert found["upper"] == pytest.approx(0.001)
    assert 3 * found["sigma"] > 0.0015


def test_the_check_of_rss_says_where_the_simple_method_fails(post):
    """One uniform law: the normal interval is far off (JCGM 101:2008, 8.2)."""
    answer = post("/v1/budget", chain({"max": "1 mV", "at": "output"}, coverage=0.95))
    assert answer["checks"]["rss_holds"] is False
    normal = post(
        "/v1/budget", chain({"typ": "1.2 mV", "at": "output"}, coverage=0.95, monte_carlo={"trials": 2_000_000})
    )
    assert normal["checks"]["rss_holds"] is True


def test_the_check_is_left_open_where_trials_are_too_few(post):
    methods = ["rss", "monte_carlo"]
    checks = post("/v1/budget", chain({"typ": "9.9 mV"}, monte_carlo={"trials": 1000}, methods=methods))["checks"]
    assert "rss_holds" not in checks
    assert "too few trials" in checks["detail"]


@pytest.mark.parametrize(("u", "digits", "tolerance"), [(0.00035, 2, 0.000005), (0.0004, 1, 0.00005), (2.0, 2, 0.05)])
def test_the_numerical_tolerance_is_that_of_the_examples(u, digits, tolerance):
    """JCGM 101:2008, 7.9.2, examples 1 and 2 (from memory; recomputed)."""
    assert numerical_tolerance(u, digits) == pytest.approx(tolerance, rel=1e-12)


@pytest.mark.parametrize(
    ("limit", "pointer"),
    [
        ({}, "#/limit"),
        ({"max": "-1 mV"}, "#/limit/max"),
        ({"min": "-1 mV"}, "#/limit/min"),
        ({"min": "1 mV", "max": "1 mV"}, "#/limit/max"),
        ({"max": "1 mA"}, "#/limit/max"),
        ({"of_span": "-1 %"}, "#/limit/of_span"),
        ({"of_reading": "1 mV"}, "#/limit/of_reading"),
        ({"max": "1 mV", "by": ["monte_carlo"]}, "#/limit/by/0"),
    ],
)
def test_a_limit_that_means_nothing_is_refused(client, limit, pointer):
    response = client.post("/v1/budget", json=chain({"max": "1 mV"}, limit=limit, methods=["rss"]))
    assert response.status_code == 422
    assert pointer in {error["pointer"] for error in response.get_json()["errors"]}


def test_of_span_needs_a_span(client):
    body = chain({"max": "1 mV"}, limit={"of_span": 0.01}, methods=["rss"])
    body["input"]["values"] = [1]
    errors = client.post("/v1/budget", json=body).get_json()["errors"]
    assert errors[0]["pointer"] == "#/limit/of_span"
