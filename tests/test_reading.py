"""How a data sheet line is read: shape, sigma, bounds and the sentence told back (through the service)."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats


def budget_of(source: dict, **more) -> dict:
    """A chain with one source at gain 1."""
    return {
        "input": {"unit": "V", "values": [1]},
        "stages": [{"name": "stage", "gain": 1, "sources": [{"name": "source", "effect": "offset", **source}]}],
        "methods": ["worst_case", "rss"],
        **more,
    }


def read(post, source: dict, **more) -> dict:
    return post("/v1/budget", budget_of(source, **more))["contributions"][0]


def refused(client, source: dict, **more) -> dict[str, str]:
    response = client.post("/v1/budget", json=budget_of(source, **more))
    assert response.status_code == 422, response.get_data(as_text=True)
    return {error["pointer"]: error["detail"] for error in response.get_json()["errors"]}


PLACE = "#/stages/0/sources/0"


def test_a_lone_max_is_read_as_uniform(post):
    """JCGM 100:2008, 4.3.7: half-width over the square root of 3."""
    found = read(post, {"max": "3 mV"})
    assert (found["shape"], found["source_unit"], found["bounds"]) == ("uniform", "mV", [-3.0, 3.0])
    assert found["sigma"] == pytest.approx(3 / np.sqrt(3), rel=1e-14)
    assert found["reading"].startswith("max only: uniform")


def test_typ_and_max_are_read_as_a_cut_normal_law(post):
    """Common practice; sigma of the law checked with scipy's truncated normal."""
    found = read(post, {"typ": "1 mV", "max": "3 mV"})
    assert found["shape"] == "truncated_normal"
    assert found["sigma"] == pytest.approx(stats.truncnorm(-3, 3).std(), rel=1e-12)


def test_typ_alone_is_read_as_normal_and_bounded_by_three_sigma_in_the_worst_case(post):
    found = read(post, {"typ": "1 mV"})
    assert (found["shape"], found["sigma"], found["bounds"]) == ("normal", 1.0, [-3.0, 3.0])
    assert read(post, {"typ": "1 mV"}, rules={"unbounded_sigmas": 5})["bounds"] == [-5.0, 5.0]


def test_mean_shifts_the_parent_and_typ_is_mean_plus_one_sigma(post):
    found = read(post, {"mean": "1 mV", "typ": "2 mV", "max": "4 mV"})
    law = stats.truncnorm(-5, 3, loc=1, scale=1)
    assert found["mean"] == pytest.approx(law.mean(), rel=1e-12)
    assert found["sigma"] == pytest.approx(law.std(), rel=1e-12)


def test_the_default_mean_of_unsymmetrical_limits_is_their_middle(post):
    found = read(post, {"min": "-1 mV", "max": "5 mV", "typ": "3 mV"})
    law = stats.truncnorm(-3, 3, loc=2, scale=1)
    assert found["mean"] == pytest.approx(2.0, rel=1e-12)
    assert found["sigma"] == pytest.approx(law.std(), rel=1e-12)


@pytest.mark.parametrize(
    ("shape", "law"),
    [
        ("uniform", stats.uniform(-3, 6)),
        ("triangular", stats.triang(0.5, -3, 6)),
        ("trapezoidal", stats.trapezoid(0.25, 0.75, -3, 6)),
        ("arcsine", stats.arcsine(-3, 6)),
        ("two_point", stats.rv_discrete(values=([-3, 3], [0.5, 0.5]))),
    ],
)
def test_a_named_shape_has_the_moments_of_scipys_law(post, shape, law):
    found = read(post, {"max": "3 mV", "shape": shape})
    assert found["shape"] == shape
    assert found["mean"] == pytest.approx(law.mean(), abs=1e-12)
    assert found["sigma"] == pytest.approx(law.std(), rel=1e-12)


def test_a_triangular_law_with_a_mean_has_its_peak_where_the_mean_wants_it(post):
    found = read(post, {"min": "0 mV", "max": "6 mV", "mean": "2.5 mV", "shape": "triangular"})
    law = stats.triang(1.5 / 6, 0, 6)
    assert found["mean"] == pytest.approx(2.5, rel=1e-12)
    assert found["sigma"] == pytest.approx(law.std(), rel=1e-12)


def test_student_t_has_the_sigma_of_its_law(post):
    """JCGM 101:2008, 6.4.9, and scipy's t law."""
    found = read(post, {"typ": "1 mV", "shape": "student_t", "dof": 5})
    assert found["sigma"] == pytest.approx(stats.t(5).std(), rel=1e-12)


def test_samples_are_read_as_their_empirical_law(post):
    """Linear between order statistics: a mixture of uniform pieces, summed here piece by piece."""
    values = np.array([1.0, 2.0, 4.0, 8.0])
    found = read(post, {"samples": [f"{value} mV" for value in values]})
    low, high = values[:-1], values[1:]
    mean = np.mean((low + high) / 2)
    second = np.mean((low**2 + low * high + high**2) / 3)
    assert found["mean"] == pytest.approx(mean, rel=1e-12)
    assert found["sigma"] == pytest.approx(np.sqrt(second - mean**2), rel=1e-12)
    assert found["bounds"] == [1.0, 8.0]


@pytest.mark.parametrize("share", [0.6827, 0.5, 0.9])
def test_typ_covers_solves_the_parent_for_the_shipped_parts(post, share):
    """The solved law has the share inside +-typ, by scipy's truncated normal with the same sigma."""
    found = read(post, {"typ": "1 mV", "max": "3 mV"}, rules={"typ_covers": share})
    parent = float(found["reading"].split("sigma = ")[1].split(" ")[0])
    law = stats.truncnorm(-3 / parent, 3 / parent, scale=parent)
    assert law.cdf(1) - law.cdf(-1) == pytest.approx(share, abs=1e-5)
    assert found["sigma"] == pytest.approx(law.std(), rel=1e-5)


def test_typ_covers_is_refused_where_no_cut_normal_law_can_do_it(client):
    faults = refused(client, {"typ": "2.9 mV", "max": "3 mV"}, rules={"typ_covers": 0.5})
    assert "even a flat law" in faults[f"{PLACE}/typ"]


def test_max_sigmas_reads_a_lone_max_as_a_cut_normal_law(post):
    found = read(post, {"max": "3 mV"}, rules={"max_sigmas": 2})
    assert found["shape"] == "truncated_normal"
    assert found["sigma"] == pytest.approx(1.5 * stats.truncnorm(-2, 2).std(), rel=1e-12)


def test_typ_sigmas_divides_typ(post):
    assert read(post, {"typ": "2 mV"}, rules={"typ_sigmas": 2})["sigma"] == 1.0


def test_normal_with_a_max_is_not_screened(post):
    found = read(post, {"max": "3 mV", "shape": "normal"})
    assert (found["sigma"], found["bounds"]) == (1.0, [-3.0, 3.0])
    assert read(post, {"max": "3 mV", "shape": "normal"}, rules={"max_sigmas": 2.576})["sigma"] == pytest.approx(
        3 / 2.576
    )


def test_a_rejection_in_db_is_an_error_of_ten_to_the_minus_r_over_twenty(post):
    """100 dB guaranteed, 115 dB typical, per volt of supply."""
    more = {"conditions": {"supply": {"nominal": "5 V", "values": ["5.25 V"]}}}
    answer = post("/v1/budget", budget_of({"min": "100 dB", "typ": "115 dB", "per": "supply"}, **more))
    found = answer["contributions"][0]
    assert found["bounds"] == pytest.approx([-1e-5, 1e-5])
    assert answer["points"][0]["worst_case"]["upper"] == pytest.approx(0.25 * 1e-5)


def test_max_in_db_is_taken_as_min(post):
    more = {"conditions": {"supply": {"nominal": "5 V", "values": ["5.25 V"]}}}
    assert read(post, {"max": "100 dB", "per": "supply"}, **more)["bounds"] == pytest.approx([-1e-5, 1e-5])


@pytest.mark.parametrize(
    ("source", "member", "words"),
    [
        ({"typ": "4 mV", "max": "3 mV"}, "typ", "beyond"),
        ({"min": "5 mV", "max": "3 mV"}, "max", "larger than min"),
        ({"max": "-3 mV"}, "max", "must be positive"),
        ({"typ": "-1 mV"}, "typ", "must be positive"),
        ({"typ": "1 mV", "mean": "1 mV", "max": "3 mV"}, "typ", "exceed the mean"),
        ({"max": 0}, "max", "must be positive"),
        ({"max": "3 mV", "mean": "1 mV", "shape": "uniform"}, "mean", "give min and max about that mean"),
        ({"max": "3 mV", "mean": "5 mV", "typ": "1 mV"}, "mean", "must lie between"),
        ({"typ": "1 mV", "shape": "uniform"}, "shape", "needs max"),
        ({"typ": "1 mV", "shape": "student_t", "dof": 2}, "dof", "above 2"),
        ({"samples": [1, 2], "max": 3}, "max", "samples stand alone"),
        ({"samples": [1, 1, 1]}, "samples", "different values"),
        ({"max": "3 mV", "shape": "samples"}, "shape", "needs samples"),
        ({"min": "100 dB", "max": "90 dB"}, "max", "one guaranteed figure"),
        ({"min": "100 dB", "typ": "90 dB"}, "typ", "larger figure"),
        ({"max": "3 mV", "top_ratio": 0.5}, "top_ratio", "trapezoidal"),
        ({"max": "3 mA"}, "max", "units close"),
    ],
)
def test_a_contradiction_is_refused_at_its_member(client, source, member, words):
    faults = refused(client, source)
    assert words in faults[f"{PLACE}/{member}"]


def test_a_source_without_any_figure_is_refused(client):
    assert "give typ, max" in refused(client, {})[PLACE]


def test_a_gain_error_that_can_reach_minus_one_hundred_percent_is_refused(client):
    faults = refused(client, {"effect": "gain", "max": "100 %"})
    assert "-100 %" in faults[PLACE]
