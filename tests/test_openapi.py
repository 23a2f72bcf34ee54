"""The OpenAPI document: valid, fresh, and true to what the service takes and answers."""

from __future__ import annotations

import json
from dataclasses import MISSING
from dataclasses import fields as fields_of
from pathlib import Path

import jsonschema
import pytest
from openapi_spec_validator import OpenAPIV31SpecValidator, validate
from stagesum_schemas import budget, budget_answer, openapi
from stagesum_schemas.base import RecordSchema
from stagesum_schemas.fields import QuantityField

ROOT = Path(__file__).parents[1]


def schemas(module):
    made = [c for c in vars(module).values() if isinstance(c, type) and issubclass(c, RecordSchema)]
    return [c for c in made if c is not RecordSchema]


def validator(name):
    document = openapi.document()
    schema = {"$ref": f"#/components/schemas/{name}", "components": document["components"]}
    return jsonschema.Draft202012Validator(schema)


def test_the_document_is_valid():
    """By the validator that stands behind the OpenAPI 3.1 meta-schema."""
    validate(openapi.document(), cls=OpenAPIV31SpecValidator)


def test_the_committed_file_is_fresh():
    committed = (ROOT / "schemas/openapi.json").read_text(encoding="utf-8")
    assert committed == openapi.text(), "run python -m stagesum_schemas.openapi"


def test_the_service_gives_the_same_document(client):
    assert client.get("/openapi.json").get_data(as_text=True) == openapi.text()


@pytest.mark.parametrize("schema", schemas(budget) + schemas(budget_answer), ids=lambda s: s.__name__)
def test_a_schema_has_the_members_of_its_record(schema):
    assert set(schema._declared_fields) == {f.name for f in fields_of(schema.record)}
    assert set(schema.members()) == {f.name.rstrip("_") for f in fields_of(schema.record)}


@pytest.mark.parametrize("schema", schemas(budget_answer), ids=lambda s: s.__name__)
def test_an_answer_has_always_what_its_record_always_has(schema):
    needed = {f.name for f in fields_of(schema.record) if f.default is MISSING and f.default_factory is MISSING}
    assert {name for name, field in schema._declared_fields.items() if field.required} == needed


def test_every_member_has_a_description():
    for name, schema in openapi.document()["components"]["schemas"].items():
        for member, told in schema["properties"].items():
            assert told.get("description"), f"{name}.{member}"


def quantities(schema):
    """Every quantity of a schema, in lists and objects of free names too."""
    for name, field in schema._declared_fields.items():
        inner = getattr(field, "inner", None) or getattr(field, "value_field", None) or field
        if isinstance(inner, QuantityField):
            yield name, inner.metadata["description"]


@pytest.mark.parametrize("schema", schemas(budget), ids=lambda s: s.__name__)
def test_every_quantity_says_how_a_plain_number_is_read(schema):
    for name, told in quantities(schema):
        assert "plain number" in told or "fraction" in told, name


def test_the_examples_of_the_fields_are_right():
    for schema in schemas(budget):
        for field in schema._declared_fields.values():
            for example in field.metadata.get("examples", []):
                field.deserialize(example)


def test_the_request_example_is_valid_and_its_answer_too(post):
    document = openapi.document()
    example = document["paths"]["/v1/budget"]["post"]["requestBody"]["content"]["application/json"]["example"]
    validator("BudgetRequest").validate(example)
    validator("Budget").validate(post("/v1/budget", {**example, "monte_carlo": {"trials": 1000}}))


def test_a_misspelt_member_fails_the_request_schema_too():
    example = json.loads(openapi.EXAMPLE.read_text(encoding="utf-8"))
    assert not validator("BudgetRequest").is_valid({**example, "titel": "x"})
    assert not validator("BudgetRequest").is_valid({**example, "coverage": "0.9"})


def test_a_problem_is_as_documented(client):
    response = client.post("/v1/budget", json={"coverage": True})
    validator("Problem").validate(json.loads(response.get_data()))
