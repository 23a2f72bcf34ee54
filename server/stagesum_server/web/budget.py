"""``POST /v1/budget``."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

import numpy as np
from flask import Blueprint, Response
from stagesum_schemas.records import Budget, Fault

from stagesum_server.engine import budget as engine
from stagesum_server.intake import InvalidRequest
from stagesum_server.salvage import build
from stagesum_server.version import VERSION
from stagesum_server.web.answer import answer, only_json
from stagesum_server.web.body import read_json
from stagesum_server.web.problems import UncomputableError

if TYPE_CHECKING:
    from stagesum_server.engine.chain import Model
    from stagesum_server.settings import Settings

FARTHEST = 1e60  # of a signal or a factor: squares and products stay finite in double precision


def blueprint(settings: Settings) -> Blueprint:
    """Make the endpoint for these settings."""
    routes = Blueprint("budget", __name__)
    routes.before_request(only_json)

    @routes.post("/v1/budget")
    def budget() -> Response:
        return answer(_compute(read_json(), settings))

    return routes


def _compute(body: Any, settings: Settings) -> Budget:
    """Answer a body; a method that can't be had for this chain is a fault where it was named."""
    with np.errstate(all="ignore"):  # what overflows is refused in words
        model = build(body, settings.limits)
        _refuse_far_magnitudes(model)
        try:
            return engine.compute(model, VERSION, threads=settings.threads)
        except engine.MethodRefusedError as error:
            raise InvalidRequest((Fault(_where_named(body, error.method), error.detail),)) from None


def _refuse_far_magnitudes(model: Model) -> None:
    """Signals, spans and factors that are no longer safe to multiply with each other."""
    for values in (model.gains, model.nominal, model.spans, *(source.factor for source in model.sources)):
        sizes = np.abs(values[values != 0.0])
        if not np.all((sizes > 1.0 / FARTHEST) & (sizes < FARTHEST)):
            raise UncomputableError


def _where_named(body: dict[str, Any], method: str) -> str:
    if "methods" in body:
        return f"#/methods/{body['methods'].index(method)}"
    return f"#/limit/by/{body['limit']['by'].index(method)}"
