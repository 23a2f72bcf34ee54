"""The command: exit statuses, messages, and the table."""

from __future__ import annotations

import io
import json
import socket
from dataclasses import replace

import pytest
from click.testing import CliRunner
from stagesum import (
    Budget,
    Contribution,
    Histogram,
    Interval,
    Largest,
    MonteCarlo,
    Point,
    Rss,
    Service,
    VarianceParts,
    WorstCase,
)
from stagesum.command import main, serve, table


@pytest.fixture(autouse=True)
def _no_service_elsewhere(monkeypatch):
    monkeypatch.delenv("STAGESUM_URL", raising=False)


@pytest.fixture
def quick(example):
    """The example with its quickest method; 0.0117 bar is what it reaches."""
    return example | {"methods": ["worst_case"], "limit": {"max": "0.012 bar", "by": ["worst_case"]}}


@pytest.fixture
def run(tmp_path):
    """Run ``stagesum budget`` on a chain, or on text that should be one."""

    def start(chain, *options):
        file = tmp_path / "chain.json"
        file.write_text(chain if isinstance(chain, str) else json.dumps(chain), encoding="utf-8")
        return CliRunner().invoke(main, ["budget", str(file), *options])

    return start


def test_a_limit_that_is_met_ends_with_0_and_says_pass_last(run, quick):
    result = run(quick)
    assert result.exit_code == 0
    assert result.stdout.splitlines()[-1].startswith("VERDICT: PASS, decided by worst case (pass)")


def test_a_limit_that_is_not_met_ends_with_1(run, quick):
    quick["limit"]["max"] = "0.011 bar"
    result = run(quick)
    assert result.exit_code == 1
    assert "VERDICT: FAIL" in result.stdout


def test_an_undecided_limit_ends_with_1(run, quick):
    quick |= {"methods": ["monte_carlo"], "monte_carlo": {"trials": 10_000, "seed": 1, "sampling": "plain"}}
    quick["limit"] = {"max": "0.009 bar", "yield": 0.9998, "by": ["monte_carlo"]}
    result = run(quick)
    assert "VERDICT: UNDECIDED" in result.stdout
    assert result.exit_code == 1


def test_no_limit_ends_with_0(run, quick):
    del quick["limit"]
    result = run(quick)
    assert result.exit_code == 0
    assert result.stdout.splitlines()[-1] == "VERDICT: none, no limit is given"


def test_a_wrong_chain_ends_with_2_and_one_fault_a_line(run, quick):
    quick["stages"][0]["sources"][0]["max"] = "40 hours"
    quick["stages"][1]["sources"][0]["max"] = "50 uA"
    result = run(quick)
    assert result.exit_code == 2
    assert result.stdout == ""
    places = [line.split(": ")[1] for line in result.stderr.splitlines()]
    assert places == ["#/stages/0/sources/0/max", "#/stages/1/sources/0/max"]


@pytest.mark.parametrize("text", ["", "{", "\x00", "[" * 100_000, '{"title": NaN}'])
def test_text_that_is_no_json_ends_with_2(run, text):
    result = run(text)
    assert result.exit_code == 2
    assert result.stderr.startswith("stagesum: ")


def test_a_missing_file_ends_with_2():
    result = CliRunner().invoke(main, ["budget", "no such file.json"])
    assert result.exit_code == 2
    assert "no such file.json" in result.stderr


def test_an_address_that_is_none_ends_with_2(run, quick):
    result = run(quick, "--url", "localhost:8000")
    assert result.exit_code == 2
    assert "http://host:port" in result.stderr


def test_a_service_that_is_not_there_ends_with_3(run, quick):
    with socket.create_server(("127.0.0.1", 0)) as silent:  # takes the connection and never answers
        address = f"http://127.0.0.1:{silent.getsockname()[1]}"
        result = run(quick, "--url", address, "--timeout", "0.1")
    assert result.exit_code == 3
    assert "gave no answer within the timeout" in result.stderr


@pytest.mark.parametrize("seconds", ["nan", "inf", "0", "-1", "soon"])
def test_a_timeout_that_is_no_time_ends_with_2(run, quick, seconds):
    with socket.create_server(("127.0.0.1", 0)) as silent:
        result = run(quick, "--url", f"http://127.0.0.1:{silent.getsockname()[1]}", "--timeout", seconds)
    assert result.exit_code == 2
    assert "--timeout" in result.stderr


def test_a_file_that_fails_while_it_is_read_ends_with_2(run, quick, monkeypatch):
    class Failing(io.BytesIO):
        name = "chain.json"

        def read(self, *_words):
            raise OSError(5, "Input/output error")

    monkeypatch.setattr("click.File.convert", lambda *_words: Failing())
    result = run(quick)
    assert result.exit_code == 2
    assert result.stderr == "stagesum: chain.json can't be read: Input/output error\n"


def test_a_chain_comes_from_standard_input(quick):
    result = CliRunner().invoke(main, ["budget", "-"], input=json.dumps(quick))
    assert result.exit_code == 0


def test_json_is_the_whole_answer(run, quick, client):
    answer = client.post("/v1/budget", data=json.dumps(quick), content_type="application/json")
    result = run(quick, "--json")
    assert result.exit_code == 0
    assert json.loads(result.stdout) == answer.get_json()


def test_serve_names_a_library_that_is_missing(monkeypatch):
    monkeypatch.setattr(serve_module(), "find_spec", lambda name: None if name == "gunicorn" else name)
    result = CliRunner().invoke(main, ["serve"])
    assert result.exit_code == 3
    assert "needs gunicorn" in result.stderr


def test_serve_hands_over_to_gunicorn(monkeypatch):
    started = []
    monkeypatch.setattr(serve_module().os, "execv", lambda file, words: started.append((file, words)))
    assert CliRunner().invoke(main, ["serve", "--port", "8123", "--workers", "3"]).exit_code == 0
    (file, words) = started[0]
    assert file == words[0]
    assert words[-5:] == ["--bind", "127.0.0.1:8123", "--workers", "3", "stagesum_server.app:create_app()"]


def serve_module():
    """The module; the package's attribute of that name is the command."""
    import sys

    assert serve.name == "serve"
    return sys.modules["stagesum.command.serve"]


# ---------------------------------------------------------------------------------------------
# The table


def bare(points, **more):
    """A budget with nothing but points."""
    return Budget(
        title="",
        service=Service("stagesum", "0", "v1"),
        refer_to="output",
        unit="V",
        points=tuple(points),
        governing_point=0,
        contributions=(),
        variance_parts=VarianceParts(1.0, 0.0),
        assumptions=(),
        cautions=(),
        coverage=0.95,
        **more,
    )


def at(value, worst, conditions=None):
    extremes = WorstCase(-worst, worst, Interval(-worst, worst))
    return Point(value, conditions or {}, value, worst_case=extremes)


def test_the_table_keeps_within_120_columns(run, example):
    example["stages"][0]["name"] = "b" * 80
    example["correlations"] = []
    lines = run(example).stdout.splitlines()
    assert max(map(len, lines)) <= 120
    assert any(line.startswith("bbb") and "../linearity " in line for line in lines)  # the source's own name stays


def test_every_source_is_followed_by_its_data_sheet_reading(run, quick):
    lines = run(quick).stdout.splitlines()
    row = next(i for i, line in enumerate(lines) if line.startswith("bridge/linearity"))
    assert lines[row + 1].strip().startswith("max only: uniform between -0.05 and 0.05 %")


def test_absent_sections_are_left_out():
    text = table.draw(bare([at(1.0, 0.002)]))
    assert "rss" not in text
    assert "Monte Carlo" not in text
    assert "CONTRIBUTIONS" not in text
    assert "ASSUMPTIONS" not in text
    assert text.splitlines()[0] == "Error budget"


def test_errors_are_rounded_outwards_and_permitted_errors_inwards():
    point = replace(at(1.0, 0.00123401), limit=Interval(-0.00234591, 0.00234599))
    row = next(line for line in table.draw(bare([point])).splitlines() if line.startswith("*"))
    assert row.split()[-3:] == ["+-2.345", "+-1.235", "+-1.235"]


@pytest.mark.parametrize(
    ("limit", "share"),
    [((-0.004, 0.002), "100 %"), ((-0.002, 0.008), "100 %"), ((0.0, 0.004), "200 %"), ((0.0, 0.0), "inf %")],
)
def test_an_error_is_held_against_the_limit_of_its_side(limit, share):
    """Errors of +-2 mV; where no error of zero is permitted, distances count from the middle."""
    point = replace(at(1.0, 0.002), limit=Interval(*limit))
    assert f" V, {share} of the limit," in table.draw(bare([point]))


def test_rounding_noise_of_a_double_does_not_raise_a_limit():
    row = next(line for line in table.draw(bare([at(1.0, 0.1 + 0.2)])).splitlines() if line.startswith("*"))
    assert row.split()[-1] == "+-300.0"  # 0.30000000000000004 V, in 1e-3 V


def test_beyond_24_points_the_governing_and_the_worst_are_shown():
    points = [at(float(i), 0.001 * (i + 1)) for i in range(30)]
    lines = table.draw(bare(points)).splitlines()
    shown = [line[1:].split()[0] for line in lines[5:] if line[1:].split() and line[1:].split()[0].isdigit()]
    assert shown == ["0", *map(str, range(7, 30))]  # 0 governs by decree
    assert "6 points with smaller errors are not shown; --json has all 30." in lines


def test_many_conditions_are_cut_with_a_word_about_it():
    names = {f"condition number {i}": 1.0 for i in range(12)}
    text = table.draw(bare([at(1.0, 0.001, names)]))
    assert "Conditions not shown: condition number 4," in text
    assert max(map(len, text.splitlines())) <= 120


def test_conditions_make_room_for_wide_figures():
    names = {f"condition number {i}": -1.23456e-05 for i in range(4)}
    extremes = WorstCase(-0.0123, 0.9345, Interval(-0.0123, 0.9345))
    text = table.draw(bare([Point(1.23456e-05, names, 1.23456e-05, worst_case=extremes)]))
    assert max(map(len, text.splitlines())) <= 120
    assert "Conditions not shown: condition number 3;" in text


def test_the_bound_of_a_small_source_is_rounded_up_and_not_to_zero():
    def source(name, bound):
        largest = Largest(0, bound, 0.0)
        return Contribution(
            "a", name, "offset", "uniform", "V", 0, 0, (), "max only", "unit", 1, bound, 0, 0, 0, largest
        )

    found = replace(bare([at(1.0, 0.001)]), contributions=(source("large", 0.0012341), source("small", 1e-9)))
    lines = table.draw(found).splitlines()
    written = [next(line for line in lines if line.startswith(f"a/{name}")).split()[-3] for name in ("large", "small")]
    assert written == ["1.235", "0.001"]


@pytest.mark.parametrize(
    ("share", "interval", "written"),
    [
        (0.99979999, (0.99971234, 0.99981234), "99.979 % of"),  # a target of 99.98 % is missed
        (1.0 - 1e-13, (0.9, 1.0), "99.999999999 % of"),  # not all
        (0.9998, (0.99971234, 0.99981234), "95 % confidence: 99.971 % .. 99.982 %)"),
    ],
)
def test_a_yield_is_rounded_down_and_its_interval_outwards(share, interval, written):
    trials = MonteCarlo(1000, 1, Histogram((), ()), joint_yield=share, joint_yield_interval=interval)
    assert written in table.draw(replace(bare([at(1.0, 0.001)]), monte_carlo=trials))


def test_magnitudes_far_apart_have_a_table():
    point = replace(at(1.0, 1e-9), rss=Rss(0.0, 1.2345e40, 3.0, -1e-9, 1e-9, cut=True))
    text = table.draw(bare([point]))
    assert "1.234e+49" in text  # in units of 1e-9 V
    assert max(map(len, text.splitlines())) <= 120


def test_what_a_terminal_would_obey_is_not_passed_on():
    text = table.draw(replace(bare([at(1.0, 0.001)]), title="a\x1b[2Jb"))
    assert "\x1b" not in text
    assert "a?[2Jb" in text


def test_a_cut_rss_is_told():
    rss = Rss(mean=0.0, sigma=0.001, coverage_factor=3.0, lower=-0.002, upper=0.002, cut=True)
    assert "cut at the worst case" in table.draw(bare([Point(1.0, {}, 1.0, rss=rss)]))


@pytest.mark.parametrize("size", [0.0, 1e-30, 1e-9, 1.0, 1e12])
def test_any_magnitude_has_a_table(size):
    text = table.draw(bare([at(1.0, size)]))
    assert max(map(len, text.splitlines())) <= 120
