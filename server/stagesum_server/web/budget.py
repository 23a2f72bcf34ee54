"""``POST /v1/budget``."""

from __future__ import annotations

from importlib.metadata import PackageNotFoundError, version
from typing import TYPE_CHECKING

import numpy as np
from flask import Blueprint, Response
from stagesum_schemas.records import Fault

from stagesum_server.engine import budget as engine
from stagesum_server.intake import InvalidRequest
from stagesum_server.salvage import build
from stagesum_server.web.body import answer, only_json, read_json

if TYPE_CHECKING:
    from stagesum_server.settings import Settings


def own_version() -> str:
    """Version of the installed distribution."""
    try:
        return version("stagesum")
    except PackageNotFoundError:  # run from the source folder
        return "0"


def blueprint(settings: Settings) -> Blueprint:
    """Make the endpoint for these settings."""
    routes = Blueprint("budget", __name__)
    routes.before_request(only_json)
    running = own_version()

    @routes.post("/v1/budget")
    def budget() -> Response:
        body = read_json()
        with np.errstate(all="ignore"):  # what overflows is refused below, in words
            model = build(body, settings.limits)
            record = engine.compute(model, running, threads=settings.threads)
        try:
            return answer(record.to_dict())
        except ValueError:
            raise InvalidRequest((Fault("#", OVERFLOW),)) from None

    return routes


OVERFLOW = "the figures are so large or so small that results can't be written as numbers; check units and gains"
