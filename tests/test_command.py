"""The command: what it prints, and the exit status that a pipeline gates on."""

from __future__ import annotations

import json

import pytest
from click.testing import CliRunner
from stagesum.command import main
from stagesum.command.numbers import interval, outward
from stagesum.command.table import WIDTH, draw
from stagesum_schemas.records import Budget, Interval


@pytest.fixture(autouse=True)
def no_url(monkeypatch):
    monkeypatch.delenv("STAGESUM_URL", raising=False)


@pytest.fixture
def chain(example, tmp_path):
    """Write a variant of the example to a file; gives its path."""
    example["monte_carlo"]["trials"] = 20_000

    def write(**changes) -> str:
        file = tmp_path / "chain.json"
        file.write_text(json.dumps({k: v for k, v in (example | changes).items() if v is not None}))
        return str(file)

    return write


def run(*arguments: str, **options):
    return CliRunner().invoke(main, arguments, **options)


def test_a_limit_that_is_met_exits_0(chain):
    result = run("budget", chain(limit={"max": "0.02 bar"}))
    assert result.exit_code == 0, result.output
    assert "VERDICT: PASS" in result.stdout


def test_a_limit_that_is_not_met_exits_1(chain):
    result = run("budget", chain(limit={"max": "0.001 bar"}))
    assert result.exit_code == 1
    assert "VERDICT: FAIL" in result.stdout


def test_an_undecided_verdict_exits_1(chain):
    result = run("budget", chain(limit={"max": "0.009 bar", "yield": 0.9999, "by": ["monte_carlo"]}))
    assert result.exit_code == 1
    assert "VERDICT: UNDECIDED" in result.stdout


def test_without_a_limit_the_exit_status_is_0(chain):
    result = run("budget", chain(limit=None))
    assert result.exit_code == 0
    assert "VERDICT: none" in result.stdout


def test_a_wrong_chain_exits_2_and_names_the_place(chain):
    result = run("budget", chain(refer_to="nowhere"))
    assert result.exit_code == 2
    assert "#/refer_to: found 'nowhere'" in result.stderr


@pytest.mark.parametrize(
    ("text", "words"), [("{", "not JSON"), ("[]", "no JSON object"), ('{"input": 1, "input": 2}', "stands twice")]
)
def test_what_is_no_chain_exits_2(tmp_path, text, words):
    file = tmp_path / "chain.json"
    file.write_text(text)
    result = run("budget", str(file))
    assert result.exit_code == 2
    assert words in result.stderr


def test_a_missing_file_exits_2():
    result = run("budget", "nowhere.json")
    assert result.exit_code == 2
    assert "can't be read" in result.stderr


def test_an_unreachable_service_exits_3(chain):
    result = run("budget", chain(), "--url", "http://127.0.0.1:9")
    assert result.exit_code == 3
    assert "can't be reached" in result.stderr


def test_standard_input_is_read(chain):
    with open(chain(), encoding="utf-8") as file:
        result = run("budget", "-", "--json", input=file.read())
    assert result.exit_code == 0
    assert json.loads(result.stdout)["verdict"]["overall"] == "pass"


def test_the_table_fits_and_tells_everything(post, example):
    text = draw(Budget.from_dict(post("/v1/budget", example)))
    assert max(len(line) for line in text.splitlines()) <= WIDTH
    for words in ("Irrigation line", "worst case   fail", "bridge/linearity", "Assumptions", "Cautions", "±0.01169"):
        assert words in text


def test_many_points_are_cut_down_with_a_word(post, example):
    example["input"]["values"] = list(range(11))
    example["methods"] = ["worst_case", "rss"]
    del example["limit"]
    text = draw(Budget.from_dict(post("/v1/budget", example)))
    assert "42 more points" in text


@pytest.mark.parametrize(
    ("value", "side", "text"),
    [
        (0.0116923, 1, "0.0117"),
        (0.011692, -1, "0.01169"),
        (-0.0116921, -1, "-0.0117"),
        (0.009, 1, "0.009"),
        (0, 1, "0"),
    ],
)
def test_an_interval_never_shrinks_by_rounding(value, side, text):
    assert outward(value, side) == text


def test_unsymmetrical_intervals_show_both_ends():
    assert interval(Interval(-1.0, 2.0)) == "-1 to 2"
    assert interval(Interval(-2.0, 2.0)) == "±2"
