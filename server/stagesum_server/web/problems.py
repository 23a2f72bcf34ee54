"""The whole error policy: every error is an ``application/problem+json`` (RFC 9457)."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

from flask import Response, current_app, request
from stagesum_schemas.records import Fault, Problem
from werkzeug.exceptions import HTTPException, MethodNotAllowed, NotFound, RequestEntityTooLarge
from werkzeug.http import HTTP_STATUS_CODES

from stagesum_server.intake import InvalidRequest

if TYPE_CHECKING:
    from collections.abc import Iterable

    from flask import Flask

PROBLEM_JSON = "application/problem+json"
MOST_TOLD = 1000  # faults of one body
SHORT = 60  # characters of what was sent that a message repeats
BODY_HEADERS = ("content-type", "content-length")  # of the HTML page that werkzeug would answer


UNCOMPUTABLE = "the chain's numbers leave the range that can be computed with; check the units and magnitudes"


class UncomputableError(Exception):
    """A request that is right in itself, but whose numbers overflow."""


def register(app: Flask) -> None:
    """Answer every error of ``app`` as a problem."""
    app.register_error_handler(HTTPException, _of_http)
    app.register_error_handler(InvalidRequest, _of_request)
    app.register_error_handler(UncomputableError, _of_overflow)
    app.register_error_handler(Exception, _of_defect)


def problem(
    status: int, detail: str, errors: tuple[Fault, ...] = (), headers: Iterable[tuple[str, str]] = ()
) -> Response:
    """Make the answer; the status says the kind, so the type is about:blank."""
    body = Problem("about:blank", HTTP_STATUS_CODES.get(status, "Error"), status, detail, errors).to_dict()
    if not errors:
        del body["errors"]
    response = Response(json.dumps(body, separators=(",", ":")), status, content_type=PROBLEM_JSON)
    response.headers.extend(header for header in headers if header[0].lower() not in BODY_HEADERS)
    return response


def _of_http(error: HTTPException) -> Response:
    """Keep status and headers such as Allow and Retry-After; a redirect goes through as it is."""
    status = error.code or 500
    if status < 400:
        return Response(error.get_response().get_data(), status, list(error.get_headers()))
    if status >= 500 and error.description == type(error).description:
        return problem(status, "The service can't answer now.", headers=error.get_headers())
    return problem(status, _said(error), headers=error.get_headers())


def _said(error: HTTPException) -> str:
    """The detail of an error that a caller can mend."""
    if isinstance(error, NotFound):
        return f"There is nothing at {request.path[:SHORT]!r}; /openapi.json has all paths."
    if isinstance(error, MethodNotAllowed):
        taken = ", ".join(error.valid_methods or ())
        return f"{request.path[:SHORT]} doesn't take {request.method[:SHORT]}; it takes {taken}."
    if isinstance(error, RequestEntityTooLarge):
        return f"The body has more than {request.max_content_length} bytes; split the request, or send less."
    return error.description or HTTP_STATUS_CODES[error.code or 400]


def _of_request(error: InvalidRequest) -> Response:
    count = len(error.faults)
    said = "1 fault" if count == 1 else f"{count} faults"
    told = f"the first {MOST_TOLD} are told, the very first:" if count > MOST_TOLD else "the first:"
    return problem(422, f"{said} in the body; {told} {error.faults[0].detail}", error.faults[:MOST_TOLD])


def _of_overflow(_error: UncomputableError) -> Response:
    return _of_request(InvalidRequest((Fault("#", UNCOMPUTABLE),)))


def _of_defect(error: Exception) -> Response:
    """Log what happened; the caller learns nothing about the inside."""
    current_app.logger.error("unexpected %s", type(error).__name__, exc_info=error)
    return problem(500, "A defect of the service; it has been logged.")
