"""``GET /healthz``: the process answers."""

from __future__ import annotations

from typing import TYPE_CHECKING

from flask import Blueprint

from stagesum_server.web.answer import json_answer

if TYPE_CHECKING:
    from flask import Response

blueprint = Blueprint("health", __name__)


@blueprint.get("/healthz")
def healthz() -> Response:
    """Say that the process is alive."""
    return json_answer({"status": "ok"})
