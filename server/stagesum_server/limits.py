"""Sizes beyond which a request is refused rather than computed."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Limits:
    """Largest sizes of one request."""

    max_points: int = 2000
    max_sources: int = 1000
    max_stages: int = 200
    max_trials: int = 10**9
