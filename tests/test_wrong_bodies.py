"""Wrong bodies: each member wrong in every way its field knows, and a list of faults that callers make.

Every one gets a 4xx with a place that exists in what was sent, never a 500.
"""

from __future__ import annotations

import copy
import json
from typing import Any
from urllib.parse import unquote

import pytest
from marshmallow import validate
from stagesum_schemas import fields
from stagesum_schemas.budget import BudgetRequestSchema

LAW = {"mean": 0, "shape": "truncated_normal"}
FULL: dict[str, Any] = {
    "title": "Irrigation line pressure transmitter",
    "input": {"unit": "bar", "values": [0, 10], "full_scale": "10 bar"},
    "conditions": {"water/air ~ temperature": {"nominal": "25 degC", "values": ["25 degC", "70 degC"]}},
    "stages": [
        {"name": "bridge", "gain": "2 mV/bar", "sources": [{"name": "zero balance", "at": "output", "max": "40 uV"}]},
        {
            "name": "amplifier",
            "gain": 100,
            "unit": "V",
            "full_scale": "2 V",
            "sources": [{"name": "offset", "typ": "12 uV", "max": "50 uV", "varies_by": "unit"}],
        },
    ],
    "calibration": {
        "points": [{"input": 0, "conditions": {"water/air ~ temperature": "25 degC"}}],
        "readings_averaged": 4,
        "standard": {"max": "0.001 bar", "common": True},
    },
    "correlations": [{"between": ["bridge/zero balance", "amplifier/offset"], "coefficient": 0.5}],
    "refer_to": "input",
    "limit": {"max": "0.05 bar", "yield": 0.99, "by": ["rss"]},
    "rules": {"typ_sigmas": 1},
    "monte_carlo": {"trials": 100, "seed": 1},
    "methods": ["worst_case", "rss"],
    "coverage": 0.9973,
}


def resolve(body, pointer: str):
    """What an RFC 6901 pointer in a URI fragment leads to; raises where it leads nowhere."""
    assert pointer.startswith("#")
    for step in unquote(pointer[1:]).split("/")[1:]:
        name = step.replace("~1", "/").replace("~0", "~")
        body = body[int(name)] if isinstance(body, list) else body[name]
    return body


def place(steps) -> str:
    return "#" + "".join(f"/{step}" for step in steps)


def walk(schema, body, steps=()):
    """Every (steps to an object, its schema) of a body."""
    yield steps, schema
    for name, field in schema._declared_fields.items():
        key = field.data_key or name
        if key not in body:
            continue
        if isinstance(field, fields.Part):
            yield from walk(field.schema, body[key], (*steps, key))
        if isinstance(field, fields.ListOf) and isinstance(field.inner, fields.Part):
            yield from walk(field.inner.schema, body[key][0], (*steps, key, 0))
        if isinstance(field, fields.ByName) and isinstance(field.value_field, fields.Part):
            chosen = next(iter(body[key]))
            yield from walk(field.value_field.schema, body[key][chosen], (*steps, key, chosen))


WRONG = {
    fields.QuantityField: [True, [], {}, "3 furlongz", "1+1 V", "", "nan", "1e999 V", 10**400],
    fields.UnitField: [5, "V+V", "furlongz", [], False],
    fields.StrictNumber: ["3", True, [], {}],
    fields.StrictInteger: ["3", True, 1.5, []],
    fields.StrictBoolean: [1, 0, "yes", []],
    fields.StrictText: [5, [], True, "bell\a", "x" * 1000],
    fields.Word: [5, [], "worst-case", "", "x" * 1000],
    fields.ListOf: [{}, "x", 5, [None], [[]]],
    fields.Part: [[], 5, "x", {"bogus": 1}],
    fields.ByName: [[], 5, "x", {"": "1 V"}, {"x": None}],
}


def wrong_values(field) -> list[Any]:
    values = [None, *next(values for kind, values in WRONG.items() if isinstance(field, kind))]
    for rule in field.validators:
        if isinstance(rule, validate.Range):
            values += [end + step for end, step in ((rule.min, -1), (rule.max, 1)) if end is not None]
    if isinstance(field, fields.ListOf):
        values += [[]] * (field.shortest > 0) + [[0] * 100_001]
    return values


CASES = [
    pytest.param(steps, field.data_key or name, field, id=place((*steps, field.data_key or name)))
    for steps, schema in walk(BudgetRequestSchema(), FULL)
    for name, field in schema._declared_fields.items()
]
OBJECTS = [pytest.param(steps, id=place(steps)) for steps, _ in walk(BudgetRequestSchema(), FULL)]


def at(body, steps):
    for step in steps:
        body = body[step]
    return body


def faults_of(client, body, status=422):
    """Faults of a refused body; each must lead somewhere and say something."""
    response = client.post("/v1/budget", data=json.dumps(body), content_type="application/json")
    assert response.status_code == status, response.get_data(as_text=True)[:500]
    faults = json.loads(response.get_data())["errors"]
    for fault in faults:
        resolve(body, fault["pointer"])
        assert 10 < len(fault["detail"]) < 700
    return {fault["pointer"]: fault["detail"] for fault in faults}


def escaped(steps) -> str:
    return place(str(step).replace("~", "~0").replace("/", "~1").replace(" ", "%20") for step in steps)


def test_the_full_body_is_right(post):
    assert post("/v1/budget", FULL)["verdict"]


@pytest.mark.parametrize(("steps", "key", "field"), CASES)
def test_a_wrong_member_is_refused_at_its_place(client, steps, key, field):
    for value in wrong_values(field):
        if value == 10**400:  # refused before members are looked at
            continue
        body = copy.deepcopy(FULL)
        at(body, steps)[key] = value
        found = faults_of(client, body)
        where = "#/stages" if "sources; at most" in str(found) else escaped((*steps, key))
        assert any(pointer.startswith(where) for pointer in found), found


@pytest.mark.parametrize("steps", OBJECTS)
def test_an_unknown_member_is_refused_at_its_place(client, steps):
    body = copy.deepcopy(FULL)
    at(body, steps)["sorces"] = 1
    assert "unknown member 'sorces'" in faults_of(client, body)[escaped((*steps, "sorces"))]


@pytest.mark.parametrize(
    ("steps", "key"), [(c.values[0], c.values[1]) for c in CASES if c.values[2].required], ids=lambda v: str(v)
)
def test_a_missing_member_is_named_at_its_parent(client, steps, key):
    body = copy.deepcopy(FULL)
    del at(body, steps)[key]
    assert any(f"{key} is missing" in detail for detail in [faults_of(client, body)[escaped(steps)]])


# ---------------------------------------------------------------------------------------------
# Faults of meaning: (steps, value, place of the fault, words of the message)

OFFSET = ("stages", 1, "sources", 0)
MEANING = [
    pytest.param((*OFFSET, "max"), "-50 uV", "#/stages/1/sources/0/max", "-50", id="negative max"),
    pytest.param(("stages", 1, "name"), "bridge", "#/stages/1/name", "stands before", id="stage twice"),
    pytest.param(("stages",), [], "#/stages", "empty list", id="no stage"),
    pytest.param(("stages", 1, "name"), "a/b", "#/stages/1/name", "'/'", id="slash in a stage's name"),
    pytest.param((*OFFSET, "max"), "5 s", "#/stages/1/sources/0/max", "close with mV", id="units don't close"),
    pytest.param((*OFFSET, "max"), "5 V + 3 V", "#/stages/1/sources/0/max", "nothing is computed", id="expression"),
    pytest.param(("input", "unit"), "bar*__import__", "#/input/unit", "", id="unit is code"),
    pytest.param((*OFFSET, "per"), "humidity", "#/stages/1/sources/0/per", "no condition", id="unknown condition"),
    pytest.param(
        ("correlations", 0, "between", 0), "bridge/zer", "#/correlations/0/between/0", "no source", id="nothing"
    ),
    pytest.param(
        ("calibration", "points"), [{"input": 1}, {"input": 1}], "#/calibration/points/1/input", "", id="same"
    ),
    pytest.param(("limit", "by"), ["monte_carlo"], "#/limit/by/0", "not among", id="method not asked for"),
    pytest.param(("methods",), ["rss", "convolutoin"], "#/methods/1", "did you mean convolution", id="unknown method"),
    pytest.param(("methods",), ["rss", "rss"], "#/methods/1", "stands before", id="method twice"),
    pytest.param(("coverage_factor",), 2, "#/coverage_factor", "beside coverage", id="coverage twice"),
    pytest.param(("monte_carlo", "adaptive"), True, "#/monte_carlo/trials", "adaptive", id="trials beside adaptive"),
    pytest.param(("monte_carlo", "seed"), 10**300, "#/monte_carlo/seed", "an integer", id="huge integer"),
    pytest.param(("coverage",), 1, "#/coverage", "at most", id="coverage 1"),
]


@pytest.mark.parametrize(("steps", "value", "where", "words"), MEANING)
def test_a_usual_fault_is_told_at_its_place(client, steps, value, where, words):
    body = copy.deepcopy(FULL)
    at(body, steps[:-1])[steps[-1]] = value
    assert words in faults_of(client, body)[where]


def test_correlations_that_contradict_each_other_are_refused(client):
    """Three pairs at -0.9 are no correlation matrix: its smallest eigenvalue is 1 - 2 * 0.9 = -0.8."""
    body = copy.deepcopy(FULL)
    body["stages"][0]["sources"].append({"name": "drift", "at": "output", "max": "1 uV"})
    names = ["bridge/zero balance", "bridge/drift", "amplifier/offset"]
    body["correlations"] = [{"between": [names[i], names[j]], "coefficient": -0.9} for i, j in ((0, 1), (0, 2), (1, 2))]
    assert set(faults_of(client, body)) <= {"#/correlations/0", "#/correlations/1", "#/correlations/2"}


def test_faults_of_form_do_not_hide_those_of_meaning(client):
    body = copy.deepcopy(FULL)
    body["stages"][0]["sources"][0]["max"] = True
    body["rules"]["typ_sigmas"] = "one"
    body["stages"][1]["sources"][0]["max"] = "5 s"
    body["correlations"][0]["between"][1] = "amplifier/ofset"
    assert set(faults_of(client, body)) >= {
        "#/stages/0/sources/0/max",
        "#/rules/typ_sigmas",
        "#/stages/1/sources/0/max",
        "#/correlations/0/between/1",
    }


def test_a_faulty_source_can_still_be_named_in_a_correlation(client):
    """Only the true fault is told, none that follows from it."""
    body = copy.deepcopy(FULL)
    body["stages"][0]["sources"][0]["max"] = True
    assert set(faults_of(client, body)) == {"#/stages/0/sources/0/max"}


def test_faults_are_told_in_the_order_of_the_body(client):
    """Form and meaning mixed, and an object's own fault before those of its members."""
    body = {"titel": "", **copy.deepcopy(FULL), "coverage": 2}
    body["stages"][0]["sources"][0]["max"] = "5 s"
    body["stages"][1]["sources"][0] = {"nmae": "offset", "max": True}
    assert list(faults_of(client, body)) == [
        "#/titel",
        "#/stages/0/sources/0/max",
        "#/stages/1/sources/0",
        "#/stages/1/sources/0/nmae",
        "#/stages/1/sources/0/max",
        "#/coverage",
    ]


def test_faults_of_meaning_alone_are_told_in_the_order_of_the_body(client):
    body = {"limit": {"max": "1 s"}, **{name: FULL[name] for name in ("input", "stages")}, "refer_to": "nowhere"}
    body["stages"] = copy.deepcopy(body["stages"])
    body["stages"][0]["sources"][0]["max"] = "5 s"
    assert list(faults_of(client, body)) == ["#/limit/max", "#/stages/0/sources/0/max", "#/refer_to"]


def test_a_source_whose_name_is_misspelt_leaves_its_correlation_unjudged(client):
    body = copy.deepcopy(FULL)
    source = body["stages"][0]["sources"][0]
    source["nmae"] = source.pop("name")
    assert set(faults_of(client, body)) == {"#/stages/0/sources/0", "#/stages/0/sources/0/nmae"}


def test_a_faulty_name_is_not_mistaken_for_that_of_another_source(client):
    body = copy.deepcopy(FULL)
    del body["correlations"]
    body["stages"][0]["sources"] = [{"name": 5, "max": "1 mV"}, {"name": "source 0", "max": "1 mV", "at": "output"}]
    assert set(faults_of(client, body)) == {"#/stages/0/sources/0/name"}


def test_a_limit_is_not_judged_at_a_node_that_is_not_known(client):
    body = copy.deepcopy(FULL)
    body["refer_to"] = 5
    assert set(faults_of(client, body)) == {"#/refer_to"}


@pytest.mark.parametrize("figure", [1e25, 1e-25, "1e25 V/V"])
def test_figures_that_overflow_are_refused_in_words(client, figure):
    body = copy.deepcopy(FULL)
    body["stages"] = [
        {"name": f"s{i}", "gain": figure, "sources": [{"name": "o", "max": "1 %", "effect": "gain"}]} for i in range(5)
    ]
    del body["correlations"], body["calibration"], body["limit"]
    body["refer_to"] = "output"
    faults_of(client, body)


def test_many_unknown_members_are_told_in_the_order_of_the_body(client):
    """Not in the order of a set, which changes from run to run: the same request has the same answer."""
    unknown = [f"member {i}" for i in range(400)]
    found = list(faults_of(client, {**FULL, **dict.fromkeys(unknown, 1)}).items())
    assert [pointer for pointer, _ in found] == [f"#/member%20{i}" for i in range(21)]
    assert found[-1][1] == "380 more members are unknown"


def test_a_long_list_of_wrong_items_is_not_told_to_its_end(client):
    assert len(faults_of(client, {**FULL, "input": {"unit": "bar", "values": ["x"] * 1000}})) == 50


# ---------------------------------------------------------------------------------------------
# Bodies that are no JSON object

RAW = [
    pytest.param(b'{"coverage": NaN}', 400, "NaN", id="NaN"),
    pytest.param(b'{"coverage": -Infinity}', 400, "Infinity", id="infinity"),
    pytest.param(b'{"coverage": 1e400}', 400, "too large", id="1e400"),
    pytest.param(b'{"coverage": 1' + b"0" * 5000 + b"}", 400, "too large", id="huge integer"),
    pytest.param(b'{"title": "a", "title": "b"}', 400, "'title' stands twice", id="member twice"),
    pytest.param(b'{"title": "\\ud800"}', 400, "surrogate", id="lone surrogate"),
    pytest.param(b'{"\\udc00": 1}', 400, "surrogate", id="lone surrogate in a name"),
    pytest.param(b'{"title": "\xff"}', 400, "UTF-8", id="not UTF-8"),
    pytest.param(b"[" * 10_000 + b"]" * 10_000, 400, "too deep", id="depth 10,000"),
    pytest.param(b'{"input":' * 10_000 + b"1" + b"}" * 10_000, 400, "too deep", id="objects, depth 10,000"),
    pytest.param(b'{"x": ' + b"[" * 700 + b"]" * 700 + b"}", 422, "fault", id="depth 700"),
    pytest.param(b"{'title': 1}", 400, "line 1, column 2", id="single quotes"),
    pytest.param(b"", 400, "not JSON", id="empty"),
    pytest.param(b"[]", 422, "an object", id="a list"),
    pytest.param(b'"text"', 422, "an object", id="a text"),
    pytest.param(b"null", 422, "an object", id="null"),
    pytest.param(b"{}", 422, "input is missing", id="an empty object"),
]


@pytest.mark.parametrize(("raw", "status", "words"), RAW)
def test_a_body_that_is_no_object_is_refused_in_words(client, raw, status, words):
    response = client.post("/v1/budget", data=raw, content_type="application/json")
    assert response.status_code == status
    assert words in json.loads(response.get_data())["detail"]


def test_a_whole_surrogate_pair_is_text(client):
    body = json.dumps({**FULL, "title": "\U0001f4a7"}).encode("ascii")
    answer = client.post("/v1/budget", data=body, content_type="application/json")
    assert json.loads(answer.get_data())["title"] == "\U0001f4a7"


def test_units_whose_product_cannot_be_carried_are_refused_in_words(client):
    """Each unit alone can be computed with; together they leave the range of numbers."""
    body = {
        "input": {"unit": "qm^2", "values": [1]},
        "conditions": {"x": {"nominal": "1 Qm^2", "values": ["2 Qm^2"]}},
        "stages": [
            {"name": "a", "gain": "1 qs^2"},
            {"name": "b", "gain": "1 qA^2/A^2"},
            {
                "name": "c",
                "gain": "1 qg/kg",
                "sources": [
                    {
                        "name": "e",
                        "effect": "offset",
                        "at": "output",
                        "per": "x",
                        "law": "square",
                        "max": "1 1/m^2",
                        "times": "1 Qs^2",
                    }
                ],
            },
        ],
    }
    assert faults_of(client, body)
