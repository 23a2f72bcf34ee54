"""Monte Carlo: agrees with theory, streams in bounded memory, gives the same bytes for any number of threads."""

from __future__ import annotations

import json

import numpy as np
import psutil
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from scipy import stats
from stagesum_server.app import create_app
from stagesum_server.settings import Settings

SHAPES = ("uniform", "triangular", "arcsine", "two_point", "truncated_normal", "trapezoidal", "normal")


def sum_of(sources: list[dict], **more) -> dict:
    """Offsets of one stage at gain 1."""
    named = [{"name": f"e{i}", "effect": "offset", **source} for i, source in enumerate(sources)]
    return {"input": {"unit": "V", "values": [0]}, "stages": [{"name": "s", "gain": 1, "sources": named}], **more}


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    shapes=st.lists(st.sampled_from(SHAPES), min_size=1, max_size=5),
    readings=st.sampled_from([1, 4, 40]),
    seed=st.integers(0, 10**6),
)
def test_rss_sigma_equals_the_simulated_sigma_within_its_standard_error(post, shapes, readings, seed):
    """Linear chain: both are the same number; standard error of a sigma from the kurtosis bound 2 of these laws."""
    trials = 40_000
    sources = [
        {"max": 1 + i, "shape": shape, "varies_by": "reading" if i % 2 else "unit"} for i, shape in enumerate(shapes)
    ]
    body = sum_of(sources, readings_averaged=readings, monte_carlo={"trials": trials, "seed": seed})
    point = post("/v1/budget", body)["points"][0]
    sigma = point["rss"]["sigma"]
    assert point["monte_carlo"]["sigma"] == pytest.approx(sigma, abs=6 * sigma / np.sqrt(2 * trials))
    assert point["monte_carlo"]["mean"] == pytest.approx(point["rss"]["mean"], abs=6 * sigma / np.sqrt(trials))


@pytest.mark.parametrize("threads", [1, 2, 4])
def test_any_number_of_threads_gives_the_same_bytes(example, threads):
    example["monte_carlo"] = {"trials": 300_000, "seed": 7}
    answers = [
        create_app(Settings(threads=n)).test_client().post("/v1/budget", json=example).get_data() for n in (1, threads)
    ]
    assert answers[0] == answers[1]


def test_another_seed_gives_other_draws(post):
    one, two = (post("/v1/budget", sum_of([{"typ": 1}], monte_carlo={"trials": 1000, "seed": s})) for s in (1, 2))
    assert one["points"][0]["monte_carlo"]["mean"] != two["points"][0]["monte_carlo"]["mean"]


def test_the_symmetric_interval_is_that_of_the_law(post):
    """One triangular law against scipy's quantiles, within five standard errors of an order statistic."""
    trials = 200_000
    body = sum_of([{"max": 1, "shape": "triangular"}], coverage=0.9, monte_carlo={"trials": trials})
    found = post("/v1/budget", body)["points"][0]["monte_carlo"]
    law = stats.triang(0.5, -1, 2)
    error = 5 * np.sqrt(0.05 * 0.95 / trials) / law.pdf(law.ppf(0.05))
    assert found["lower"] == pytest.approx(law.ppf(0.05), abs=error)
    assert found["upper"] == pytest.approx(law.ppf(0.95), abs=error)


def test_the_shortest_interval_is_shorter_where_the_law_leans(post):
    """A triangular law with its peak at one end: the shortest 90 % interval ends at that peak."""
    body = sum_of(
        [{"min": 0, "max": 3, "mean": 1, "shape": "triangular"}], coverage=0.9, monte_carlo={"trials": 200_000}
    )
    found = post("/v1/budget", body)["points"][0]["monte_carlo"]
    law = stats.triang(0, 0, 3)
    assert found["shortest"]["lower"] == pytest.approx(0, abs=0.02)
    assert found["shortest"]["upper"] == pytest.approx(law.ppf(0.9), abs=0.02)
    assert found["shortest"]["upper"] - found["shortest"]["lower"] < found["upper"] - found["lower"]


def test_yield_and_its_interval_are_those_of_the_binomial_law(post):
    """Clopper-Pearson interval from scipy.stats for the same count."""
    body = sum_of([{"typ": 1}], limit={"max": 2}, monte_carlo={"trials": 10_000})
    answer = post("/v1/budget", body)
    found = answer["points"][0]["monte_carlo"]
    passed = round(found["yield"] * 10_000)
    interval = stats.binomtest(passed, 10_000).proportion_ci(0.95, "exact")
    assert found["yield_interval"] == pytest.approx([interval.low, interval.high], rel=1e-10)
    assert found["yield"] == pytest.approx(0.9545, abs=0.01)


def test_a_unit_passes_only_if_it_is_inside_at_every_point(post):
    """Two points with independent readings: the joint yield is the product of the yields."""
    body = sum_of([{"typ": 1, "varies_by": "reading"}], limit={"max": 1}, monte_carlo={"trials": 100_000})
    body["input"]["values"] = [0, 1]
    answer = post("/v1/budget", body)
    each = [point["monte_carlo"]["yield"] for point in answer["points"]]
    assert answer["monte_carlo"]["joint_yield"] == pytest.approx(each[0] * each[1], abs=0.006)


def test_a_units_own_error_is_the_same_at_every_point(post):
    body = sum_of([{"typ": 1}], limit={"max": 1}, monte_carlo={"trials": 20_000})
    body["input"]["values"] = [0, 1]
    answer = post("/v1/budget", body)
    assert answer["monte_carlo"]["joint_yield"] == answer["points"][0]["monte_carlo"]["yield"]


def test_adaptive_trials_stop_when_the_results_are_stable(post):
    """JCGM 101:2008, 7.9: at two significant digits of u = 1.0, the tolerance is 0.05."""
    answer = post("/v1/budget", sum_of([{"typ": 1}], monte_carlo={"adaptive": True, "seed": 3}))
    found = answer["monte_carlo"]
    assert found["converged"]
    assert found["tolerance"] == 0.05
    assert found["trials"] >= 2 * 37_038  # two rounds of 100 / (1 - 0.9973) trials at least
    assert answer["points"][0]["monte_carlo"]["upper"] == pytest.approx(3.0, abs=0.05)


def test_adaptive_trials_stop_at_the_ceiling_and_say_so(post):
    body = sum_of([{"typ": 0.99}], monte_carlo={"adaptive": True, "max_trials": 150_000})
    found = post("/v1/budget", body)["monte_carlo"]
    assert not found["converged"]
    assert found["trials"] <= 150_000


def test_averaging_more_than_sixteen_readings_keeps_sigma(post):
    body = sum_of([{"max": 1, "varies_by": "reading"}], readings_averaged=25, monte_carlo={"trials": 100_000})
    found = post("/v1/budget", body)["points"][0]
    assert found["monte_carlo"]["sigma"] == pytest.approx(1 / np.sqrt(3) / 5, rel=0.01)
    assert found["worst_case"]["upper"] == 1  # a bounded law's bound stays what it is


def test_averaged_readings_shrink_an_unbounded_bound(post):
    body = sum_of([{"typ": 1, "varies_by": "reading"}], readings_averaged=9, methods=["worst_case"])
    assert post("/v1/budget", body)["points"][0]["worst_case"]["upper"] == pytest.approx(1)


def test_memory_does_not_grow_with_the_trials(post):
    """Ten times the trials, no more memory (16 MB allowed for the allocator's own habits)."""
    sources = [{"typ": 1 + i, "max": 3 + 3 * i} for i in range(30)]
    process, grown = psutil.Process(), []
    for trials in (200_000, 2_000_000):
        post("/v1/budget", sum_of(sources, monte_carlo={"trials": trials}))
        grown.append(process.memory_info().rss)
    assert grown[1] - grown[0] < 16 * 2**20


def test_the_answer_is_json_without_surprises(client, example):
    text = client.post("/v1/budget", json=example).get_data(as_text=True)
    assert "NaN" not in text
    assert "Infinity" not in text
    json.loads(text)


@pytest.mark.parametrize("trials", [1000, 100_000, 150_000])
def test_refined_ends_are_order_statistics_of_all_trials(post, trials):
    """The plain histogram's end is within a bin of the refined one; a plain sort of the same draws is equal to it."""
    body = sum_of([{"max": 1}, {"max": 1, "shape": "triangular"}], coverage=0.9, methods=["monte_carlo"])
    plain = post("/v1/budget", body | {"monte_carlo": {"trials": trials}})["points"][0]["monte_carlo"]
    refined = post("/v1/budget", body | {"monte_carlo": {"trials": trials, "refine": True}})["points"][0]["monte_carlo"]
    assert refined["mean"] == plain["mean"]
    assert refined["lower"] == pytest.approx(plain["lower"], abs=2 * 4 / 16384 + 20 / trials)
    limits = {"min": refined["lower"], "max": 10}
    counted = post("/v1/budget", body | {"monte_carlo": {"trials": trials}, "limit": limits})["points"][0][
        "monte_carlo"
    ]
    # as many trials lie below that end as its rank says: the smallest 5 % less one
    assert round((1 - counted["yield"]) * trials) == np.ceil(0.05 * trials) - 1
