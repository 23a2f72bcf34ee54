"""Every shape at gain 1, drawn, against the law of the same name in scipy.stats."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
import pytest
from scipy import stats

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping

    Post = Callable[[str, Mapping[str, Any]], dict[str, Any]]

TRIALS = 100_000
# Kolmogorov's law: the largest distance of an empirical CDF is larger than this once in a million
CRITICAL = stats.kstwobign.isf(1e-6) / np.sqrt(TRIALS)

VALUES = [-0.9, -0.35, -0.3, 0.1, 0.15, 0.7, 1.4]


def empirical(values: list[float]) -> stats.rv_histogram:
    """Give the law that is linear between order statistics: the same share in each interval."""
    shares = np.full(len(values) - 1, 1.0)
    return stats.rv_histogram((shares / np.diff(values), np.array(values)), density=True)


# figures as a data sheet states them (mV), the law of scipy that they stand for
SHAPES = [
    ({"typ": 0.5}, stats.norm(0, 0.5)),
    ({"typ": 0.5, "mean": 0.2, "shape": "normal"}, stats.norm(0.2, 0.5)),
    ({"typ": 1, "max": 1.5}, stats.truncnorm(-1.5, 1.5)),
    ({"min": -0.5, "max": 2, "mean": 0.25, "typ": 1.25}, stats.truncnorm(-0.75, 1.75, 0.25, 1)),
    ({"max": 2}, stats.uniform(-2, 4)),
    ({"min": -1, "max": 3}, stats.uniform(-1, 4)),
    ({"max": 1, "shape": "triangular"}, stats.triang(0.5, -1, 2)),
    ({"min": -1, "max": 1, "mean": 0.2, "shape": "triangular"}, stats.triang(0.8, -1, 2)),
    ({"max": 1, "shape": "trapezoidal"}, stats.trapezoid(0.25, 0.75, -1, 2)),
    ({"max": 1, "shape": "trapezoidal", "top_ratio": 0.2}, stats.trapezoid(0.4, 0.6, -1, 2)),
    ({"max": 1, "shape": "arcsine"}, stats.arcsine(-1, 2)),
    ({"typ": 1, "dof": 5, "shape": "student_t"}, stats.t(5)),
    ({"samples": VALUES}, empirical(VALUES)),
]
NAMES = [str(figures) for figures, _ in SHAPES]


def answer(post: Post, figures: Mapping[str, Any]) -> dict[str, Any]:
    source = {"name": "x", "effect": "offset", **figures}
    body = {
        "input": {"unit": "mV", "values": [0]},
        "stages": [{"name": "s", "gain": 1, "sources": [source]}],
        "methods": ["rss", "monte_carlo"],
        "monte_carlo": {"trials": TRIALS, "seed": 7},
    }
    return post("/v1/budget", body)


def distance(histogram: Mapping[str, Any], law: Any) -> float:
    """Largest difference of the cumulative shares at the edges."""
    shares = np.append(0.0, np.cumsum(histogram["counts"])) / TRIALS
    return float(np.max(np.abs(shares - law.cdf(np.array(histogram["edges"])))))


@pytest.mark.parametrize(("figures", "law"), SHAPES, ids=NAMES)
def test_drawn_values_follow_the_law(post: Post, figures: Mapping[str, Any], law: Any) -> None:
    histogram = answer(post, figures)["monte_carlo"]["histogram"]
    assert sum(histogram["counts"]) == TRIALS
    assert distance(histogram, law) < CRITICAL


@pytest.mark.parametrize(("figures", "law"), SHAPES, ids=NAMES)
def test_mean_and_sigma_are_those_of_the_law(post: Post, figures: Mapping[str, Any], law: Any) -> None:
    contribution = answer(post, figures)["contributions"][0]
    assert contribution["mean"] == pytest.approx(law.mean(), rel=1e-9, abs=1e-9)
    assert contribution["sigma"] == pytest.approx(law.std(), rel=1e-9)


def test_another_law_is_noticed(post: Post) -> None:
    histogram = answer(post, {"max": 1, "shape": "triangular"})["monte_carlo"]["histogram"]
    assert distance(histogram, stats.norm(0, 1 / np.sqrt(6))) > CRITICAL


def test_two_point_draws_are_the_bounds_in_equal_shares(post: Post) -> None:
    told = answer(post, {"max": 1, "shape": "two_point"})
    counts = np.array(told["monte_carlo"]["histogram"]["counts"])
    assert [counts[0] + counts[-1], np.count_nonzero(counts)] == [TRIALS, 2]
    assert abs(counts[0] / TRIALS - 0.5) < 5 * 0.5 / np.sqrt(TRIALS)  # five standard errors
