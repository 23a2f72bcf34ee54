"""``GET /openapi.json``: the contract."""

from __future__ import annotations

from functools import cache

from flask import Blueprint, Response
from stagesum_schemas import openapi

from stagesum_server.web.answer import JSON, only_json

blueprint = Blueprint("contract", __name__)
blueprint.before_request(only_json)


@cache
def _text() -> str:
    return openapi.text()


@blueprint.get("/openapi.json")
def contract() -> Response:
    """Give the OpenAPI document."""
    return Response(_text(), content_type=JSON)
