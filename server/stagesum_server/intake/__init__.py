"""Intake: a request whose form is right becomes the engine's model; units close, names resolve.

Every semantic fault of a body is gathered with its JSON Pointer before it is refused.
"""

from stagesum_server.intake.build import build
from stagesum_server.intake.faults import InvalidRequest

__all__ = ["InvalidRequest", "build"]
