"""What the README says is what happens."""

from __future__ import annotations

import json
import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[1]
README = (ROOT / "README.md").read_text(encoding="utf-8")


def block(language: str) -> str:
    return re.search(rf"```{language}\n(.*?)```", README, re.DOTALL)[1]


def test_the_chain_of_the_tour_passes(post):
    answer = post("/v1/budget", json.loads(block("json")))
    assert answer["verdict"]["overall"] == "pass"


def test_the_table_of_the_tour_tells_the_answers_figures(post, example):
    """The full example at 10 bar, -20 degC, 5.25 V, after calibration at two points."""
    answer = post("/v1/budget", example)
    point = next(
        p for p in answer["points"] if (p["input"], p["conditions"]) == (10, {"temperature": -20, "supply": 5.25})
    )
    assert point["worst_case"]["first_order"]["upper"] == pytest.approx(0.01169, abs=5e-7)
    assert point["rss"]["sigma"] == pytest.approx(0.0031133, abs=5e-8)
    assert round(point["rss"]["outside_ppm"]) == 3842
    assert round(point["convolution"]["outside_ppm"]) == 13
    assert round(sum(p["convolution"]["outside_ppm"] for p in answer["points"])) == 159
    low, high = (1e6 * (1 - y) for y in reversed(answer["monte_carlo"]["joint_yield_interval"]))
    share = 1e6 * (1 - answer["monte_carlo"]["joint_yield"])
    assert [f"{value:.1f}" for value in (share, low, high)] == ["80.5", "79.5", "81.5"]
    assert round(100 * answer["contributions"][0]["variance_share"]) == 86
    assert answer["checks"]["rss_holds"] is False
    verdict = answer["verdict"]
    assert [verdict[m] for m in ("worst_case", "rss", "convolution", "monte_carlo")] == ["fail", "fail", "pass", "pass"]
    for figure in ("0.01169", "0.0031133", "3842 ppm", "13 ppm", "159 ppm", "80.5 ppm", "79.5 to 81.5 ppm", "86 %"):
        assert figure in README


def test_the_python_of_the_tour_runs():
    code = block("python")
    result = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=True)
    assert result.stdout.splitlines()[0].endswith("pass")
    assert result.stdout.splitlines()[1].startswith("bridge linearity 0.8597")


def test_simulated_joint_yield_agrees_with_the_recorded_brute_force_run(post, example):
    """1e8 plain trials of the same chain, seed 5: 80.03 ppm outside, 95 % interval 78.29 to 81.80 (recorded once)."""
    answer = post("/v1/budget", example)
    low, high = (1e6 * (1 - y) for y in reversed(answer["monte_carlo"]["joint_yield_interval"]))
    assert low < 81.80
    assert high > 78.29
