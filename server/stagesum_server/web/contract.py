"""``GET /openapi.json``: the contract."""

from __future__ import annotations

from functools import cache
from typing import TYPE_CHECKING

from flask import Blueprint, Response
from stagesum_schemas import openapi

from stagesum_server.web.body import JSON, only_json

if TYPE_CHECKING:
    from flask.typing import ResponseReturnValue

blueprint = Blueprint("contract", __name__)
blueprint.before_request(only_json)


@cache
def _text() -> str:
    return openapi.text()


@blueprint.get("/openapi.json")
def contract() -> ResponseReturnValue:
    """Give the OpenAPI document."""
    return Response(_text(), content_type=JSON)
