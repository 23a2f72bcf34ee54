"""The OpenAPI 3.1 document, made from the marshmallow classes; ``python -m stagesum_schemas.openapi`` writes it."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

from apispec import APISpec
from apispec.ext.marshmallow import MarshmallowPlugin

from stagesum_schemas.budget import BudgetRequestSchema
from stagesum_schemas.budget_answer import BudgetSchema, ProblemSchema
from stagesum_schemas.fields import QuantityField, UnitField
from stagesum_schemas.records import CONTRACT
from stagesum_schemas.units import LONGEST

HERE = Path(__file__).parent
TARGET = HERE.parent / "openapi.json"
EXAMPLE = HERE / "example_budget.json"
# the start of a quantity; what may follow is in the units table, which a pattern can't hold
QUANTITY_PATTERN = r"^\s*[+\-\u2212]?([0-9]+(\.[0-9]*)?|\.[0-9]+)([eE][+-]?[0-9]+)?"
INTRODUCTION = """\
Error budgets of measuring chains: worst case, root sum of squares, Monte Carlo, and a verdict.

A quantity is a string such as "150 uV", "0.1 %" or "90 dB", or a plain number in the coherent unit of its place.
The service keeps nothing: the same request gives the same answer."""

PROBLEMS = {
    400: "The body is not JSON, or not read alike by all readers (NaN, members twice, numbers too large).",
    404: "No such path.",
    405: "The path has another method; Allow names it.",
    406: "The Accept header excludes application/json.",
    413: "The body is too large.",
    415: "The body's content type is not application/json in utf-8, uncompressed.",
    422: "Not a valid chain: all faults, each with its place, what was found and what would be right.",
    429: "Too many requests; Retry-After says when to come back.",
    503: "The service is busy; Retry-After says when to come back.",
}
EXAMPLE_FAULT = {
    "pointer": "#/stages/1/sources/0/max",
    "detail": "found '5 s', a figure in s; the units close with mV here",
}
HEADERS = {405: "Allow", 429: "Retry-After", 503: "Retry-After"}


def document() -> dict[str, Any]:
    """Make the document."""
    plugin = MarshmallowPlugin(schema_name_resolver=_name)
    spec = APISpec(
        "stagesum",
        CONTRACT,
        "3.1.0",
        plugins=[plugin],
        info={"description": INTRODUCTION, "license": {"name": "MIT", "identifier": "MIT"}},
        servers=[{"url": "/"}],
    )
    converter: Any = plugin.converter  # untyped in apispec
    converter.map_to_openapi_type(QuantityField, None, None)
    converter.map_to_openapi_type(UnitField, "string", None)
    converter.add_attribute_function(_quantity)
    for status, description in PROBLEMS.items():
        spec.components.response(f"Problem{status}", _problem(status, description))
    _add_budget(spec)
    _add_probes(spec)
    made: dict[str, Any] = spec.to_dict()
    return made


def text() -> str:
    """Give the document as the committed file has it: sorted, a newline at the end."""
    return json.dumps(document(), indent=1, sort_keys=True) + "\n"


def _name(schema: Any) -> str:
    cls = schema if isinstance(schema, type) else type(schema)
    return cls.__name__.removesuffix("Schema")


def _quantity(_converter: Any, field: Any, **_kwargs: Any) -> dict[str, Any]:
    """Attributes of a quantity: a number, or a string that begins with one."""
    if not isinstance(field, QuantityField):
        return {}
    return {"type": ["number", "string"], "pattern": QUANTITY_PATTERN, "maxLength": LONGEST}


def _json(schema: Any, **more: Any) -> dict[str, Any]:
    return {"application/json": {"schema": schema, **more}}


def _problem(status: int, description: str) -> dict[str, Any]:
    example: dict[str, Any] = {"type": "about:blank", "title": "Problem", "status": status, "detail": description}
    if status == 422:
        example["errors"] = [EXAMPLE_FAULT]
    content = {"application/problem+json": {"schema": ProblemSchema, "example": example}}
    response: dict[str, Any] = {"description": description, "content": content}
    if status in HEADERS:
        response["headers"] = {HEADERS[status]: {"schema": {"type": "string"}}}
    return response


def _refusals(*statuses: int) -> dict[str, Any]:
    return {str(status): f"Problem{status}" for status in statuses}


def _add_budget(spec: APISpec) -> None:
    example = json.loads(EXAMPLE.read_text(encoding="utf-8"))
    operation = {
        "operationId": "budget",
        "summary": "Limits, distribution, contributions and verdict of one chain",
        "requestBody": {"required": True, "content": _json(BudgetRequestSchema, example=example)},
        "responses": {
            "200": {"description": "The budget.", "content": _json(BudgetSchema)},
            **_refusals(*PROBLEMS),
        },
    }
    spec.path("/v1/budget", operations={"post": operation})


def _add_probes(spec: APISpec) -> None:
    health = {"type": "object", "properties": {"status": {"const": "ok"}}, "required": ["status"]}
    for path, name, summary, schema, refusals in (
        ("/healthz", "health", "The process answers", health, (404, 405, 503)),
        ("/openapi.json", "contract", "This document", {"type": "object"}, (404, 405, 406, 503)),
    ):
        answer = {"description": f"{summary}.", "content": _json(schema)}
        operation = {
            "operationId": name,
            "summary": summary,
            "responses": {"200": answer, **_refusals(*refusals)},
        }
        spec.path(path, operations={"get": operation})


if __name__ == "__main__":
    TARGET.write_text(text(), encoding="utf-8")
