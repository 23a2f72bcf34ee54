"""Answers as bytes."""

from __future__ import annotations

import json
from typing import TYPE_CHECKING

from flask import Response

from stagesum_server.web.problems import UncomputableError

if TYPE_CHECKING:
    from stagesum_schemas.records import Record


def answer(record: Record) -> Response:
    """Write a record as JSON.

    Raises
    ------
    UncomputableError
        Where a number isn't finite: the request's magnitudes were too far apart.

    """
    try:
        text = json.dumps(record.to_dict(), allow_nan=False, separators=(",", ":"))
    except ValueError:
        raise UncomputableError(
            "the chain's numbers leave the range that can be computed with; check the units and magnitudes"
        ) from None
    return Response(text, content_type="application/json")
