"""Answers as bytes, for callers that take JSON."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING, Any

from flask import Response, request
from werkzeug.exceptions import NotAcceptable

from stagesum_server.web.problems import UncomputableError

if TYPE_CHECKING:
    from stagesum_schemas.records import Record

JSON = "application/json"


def only_json() -> None:
    """Refuse a caller that doesn't take JSON; made for ``before_request``.

    Raises
    ------
    NotAcceptable
        Where the Accept header excludes it.

    """
    accepted = request.accept_mimetypes
    if accepted and not accepted[JSON]:
        raise NotAcceptable(f"answers are {JSON}; the Accept header excludes it")


def answer(record: Record) -> Response:
    """Write a record as JSON.

    Raises
    ------
    UncomputableError
        Where a number isn't finite: the request's magnitudes were too far apart.

    """
    try:
        return json_answer(record.to_dict())
    except ValueError:
        raise UncomputableError from None


def json_answer(value: dict[str, Any]) -> Response:
    """Answer 200 with compact JSON; a ValueError where a number isn't finite."""
    return Response(json.dumps(value, allow_nan=False, separators=(",", ":")), content_type=JSON)
