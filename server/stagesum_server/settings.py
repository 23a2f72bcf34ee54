"""Settings of the service, from environment variables STAGESUM_*."""

from __future__ import annotations

import os
from dataclasses import dataclass, field, fields
from typing import TYPE_CHECKING

from stagesum_server.limits import Limits

if TYPE_CHECKING:
    from collections.abc import Mapping

PREFIX = "STAGESUM_"
MEBIBYTE = 2**20


class SettingsError(ValueError):
    """A setting has a wrong value; the message names it and says what would be right."""


def _processors() -> int:
    return os.cpu_count() or 1


@dataclass(frozen=True, slots=True)
class Settings:
    """All settings; each has a default."""

    max_body_bytes: int = 16 * MEBIBYTE
    limits: Limits = field(default_factory=Limits)
    threads: int = field(default_factory=_processors)

    @classmethod
    def from_environment(cls, environment: Mapping[str, str] | None = None) -> Settings:
        """Read STAGESUM_MAX_BODY_BYTES, STAGESUM_THREADS, STAGESUM_MAX_POINTS and so on.

        Raises
        ------
        SettingsError
            Where a value is no positive integer.

        """
        given = os.environ if environment is None else environment
        own = _positive(given, ("max_body_bytes", "threads"))
        return cls(limits=Limits(**_positive(given, tuple(f.name for f in fields(Limits)))), **own)


def _positive(given: Mapping[str, str], names: tuple[str, ...]) -> dict[str, int]:
    """Those of the settings ``names`` that are given; each is an integer above zero."""
    found = {}
    for name in names:
        variable = PREFIX + name.upper()
        text = given.get(variable, "").strip()
        if text:
            if not (text.isascii() and text.isdigit() and len(text) < 19 and int(text) > 0):
                raise SettingsError(f"{variable} is {text[:60]!r}; it must be an integer above zero")
            found[name] = int(text)
    return found
