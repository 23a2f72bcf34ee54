"""Published values that the budget endpoint must reproduce, one file an example or family beside this one.

An example file holds ``SOURCE`` (what was published and where, in words) and ``CASES``: a list of (name, body of
``POST /v1/budget``, expected rows). A row is (path into the answer, published value, tolerance, unit) and, where the
print uses another scale than the answer, a fifth member: the function that brings the answer to it.
The tolerance is half a unit of the last printed digit where nothing else is said; for Monte Carlo it is five standard
errors besides. A path is dotted; in ``contributions`` the place is ``stage/source``, as the order is not ours.
Rows marked "recomputed" hold the same value at full precision, computed once with scipy or by hand.

Shown by other endpoints, not here: curved trapezoids of JCGM 101 (no such shape), Type A statistics and the
certified statistics data sets, the uncertainty of a standard deviation, degrees of freedom of a judged limit, sample
sizes, consumer's and producer's risk, resistor networks, filter noise bandwidths.
"""

from __future__ import annotations

import runpy
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from collections.abc import Callable, Iterator, Mapping

    Post = Callable[[str, Mapping[str, Any]], dict[str, Any]]

HERE = Path(__file__).parent


def find(answer: Any, path: str) -> Any:
    """Follow a dotted path; a segment in a list is an index, or ``stage/source`` among contributions."""
    for segment in path.split("."):
        if isinstance(answer, dict):
            answer = answer[segment]
        elif segment.isdigit():
            answer = answer[int(segment)]
        else:
            answer = next(item for item in answer if f"{item['stage']}/{item['source']}" == segment)
    return answer


def miss(answer: Mapping[str, Any], row: tuple[Any, ...]) -> str | None:
    """Say how an answer misses an expected row; None where it meets it."""
    path, published, tolerance, unit, *convert = row
    found = find(answer, path)
    if convert:
        found = convert[0](found)
    if published == found or (not isinstance(published, str) and abs(found - published) <= tolerance):
        return None
    return f"{path}: published {published} {unit} within {tolerance}, found {found}"


def cases() -> Iterator[Any]:
    """Yield every case of every example file."""
    for path in sorted(HERE.glob("*.py")):
        if not path.name.startswith("test_"):
            example = runpy.run_path(str(path))
            for name, body, expected in example["CASES"]:
                yield pytest.param(example["SOURCE"], body, expected, id=f"{path.stem}: {name}")


@pytest.mark.parametrize(("source", "body", "expected"), list(cases()))
def test_published_values_are_reproduced(
    post: Post, source: str, body: Mapping[str, Any], expected: list[tuple[Any, ...]]
) -> None:
    answer = post("/v1/budget", body)
    misses = [told for row in expected if (told := miss(answer, row))]
    assert not misses, "\n".join([source, *misses])


@pytest.mark.parametrize(
    ("published", "tolerance", "met"),
    [(3.88, 0.005, True), (3.92, 0.005, False), (3.8794, 1e-3, True), (True, 0.0, False)],
)
def test_a_value_beyond_its_tolerance_is_told(published: float, tolerance: float, met: bool) -> None:
    answer = {"points": [{"rss": {"upper": 3.8794}}]}
    assert (miss(answer, ("points.0.rss.upper", published, tolerance, "V")) is None) is met


def test_a_contribution_is_found_by_its_name() -> None:
    answer = {"contributions": [{"stage": "a", "source": "b", "sigma": 1.0}, {"stage": "a", "source": "c", "sigma": 2}]}
    assert find(answer, "contributions.a/c.sigma") == 2
