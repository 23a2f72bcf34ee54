"""Loading requests: the records that the marshmallow classes make."""

from __future__ import annotations

import json
from dataclasses import fields

import pytest
from marshmallow import ValidationError
from stagesum_schemas import openapi, records
from stagesum_schemas.budget import SHAPES, BudgetRequestSchema
from stagesum_server.engine.reading import SHAPES as READ

SCHEMA = BudgetRequestSchema()
LEAST = {"input": {"unit": "bar", "values": [1]}, "stages": [{"name": "bridge", "gain": 2}]}


def test_a_request_becomes_frozen_records_with_tuples():
    request = SCHEMA.load(json.loads(openapi.EXAMPLE.read_text(encoding="utf-8")))
    assert isinstance(request, records.BudgetRequest)
    assert [stage.name for stage in request.stages] == ["bridge", "amplifier", "converter"]
    assert isinstance(request.stages[0].sources, tuple)
    assert request.limit.yield_ == 0.9998
    assert request.correlations[0].between == ("bridge/span tolerance", "converter/reference")
    assert request.conditions["supply"].values[0].text == "4.75 V"
    assert hash(request.stages[0].sources[0])


def test_what_is_not_said_has_the_defaults_of_the_records():
    request = SCHEMA.load(LEAST)
    for field in fields(records.BudgetRequest):
        if field.name not in LEAST:
            default = field.default_factory() if field.name == "conditions" else field.default
            assert getattr(request, field.name) == default


@pytest.mark.parametrize("count", [1, 2])
def test_calibration_has_one_or_two_points(count):
    points = [{"input": i} for i in range(count)]
    assert len(SCHEMA.load({**LEAST, "calibration": {"points": points}}).calibration.points) == count


@pytest.mark.parametrize(
    "more",
    [
        {"calibration": {"points": []}},
        {"calibration": {"points": [{"input": i} for i in range(3)]}},
        {"correlations": [{"between": ["a/b"], "coefficient": 1}]},
        {"correlations": [{"between": ["a/b", "a/c"], "coefficient": 1.001}]},
        {"coverage": 0.9, "coverage_factor": 2},
        {"coverage": 0},
        {"coverage": 1 - 1e-12},
        {"coverage_factor": 0},
        {"monte_carlo": {"adaptive": True, "trials": 1000}},
        {"monte_carlo": {"trials": 99}},
        {"monte_carlo": {"seed": 2**63}},
        {"monte_carlo": {"seed": -1}},
        {"limit": {"by": []}},
        {"limit": {"yield": 1}},
        {"rules": {"typ_sigmas": 0}},
        {"readings_averaged": 0},
        {"title": "x" * 201},
    ],
    ids=str,
)
def test_what_is_out_of_range_is_refused(more):
    with pytest.raises(ValidationError):
        SCHEMA.load({**LEAST, **more})


def test_ends_that_belong_to_a_range_are_taken():
    more = {"monte_carlo": {"trials": 100, "seed": 2**63 - 1}, "coverage_factor": 10, "title": "x" * 200}
    assert SCHEMA.load({**LEAST, **more}).monte_carlo.seed == 2**63 - 1


def test_the_engine_reads_every_shape_of_the_contract():
    assert set(SHAPES) == set(READ)
