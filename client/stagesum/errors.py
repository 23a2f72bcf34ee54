"""What can go wrong, as one tree.

.. code-block:: text

    StagesumError
    |-- InvalidAddress        the URL of the service is no http or https URL
    |-- MissingExtra          no URL was given and the service's own libraries aren't installed
    |-- RequestRefused        the service understood and refused: status, title, detail, faults
    |   `-- InvalidChain      400 or 422: no JSON, or no valid chain; each fault with its place
    |-- ServiceUnavailable    no connection, no answer in time, or still 429, 502, 503, 504 after all retries
    `-- UnexpectedAnswer      an answer that no stagesum service gives: no JSON, a redirect, another 5xx

A chain's file that can't be read raises the ``OSError`` of Python, a mapping that is no JSON the
``TypeError`` or ``ValueError`` of :mod:`json`.
"""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from stagesum_schemas.records import Fault, Problem


class StagesumError(Exception):
    """Base of everything that the client raises by itself."""


class InvalidAddress(StagesumError, ValueError):  # noqa: N818 - names say what happened, as the tree above reads
    """The URL of the service can't be used; the message says what would be right."""


class MissingExtra(StagesumError, ImportError):  # noqa: N818
    """The embedded service was asked for and its libraries aren't installed."""

    def __init__(self, module: str) -> None:
        """Name the ``module`` that was not found, and the two ways on."""
        super().__init__(
            f'the service needs {module}, which is not installed; either pip install "stagesum[server]", '
            "or give the URL of a running service (url=..., --url or the variable STAGESUM_URL)"
        )


class RequestRefused(StagesumError):  # noqa: N818
    """The service refused the request; ``problem`` is its whole answer (RFC 9457).

    Attributes
    ----------
    status : int
        HTTP status.
    title, detail : str
        The kind of refusal, and what was wrong.
    faults : tuple of Fault
        Each with a JSON Pointer into the request and a sentence; may be empty.

    """

    def __init__(self, problem: Problem) -> None:
        """Keep the problem; the message has every fault."""
        self.problem = problem
        self.status: int = problem.status
        self.title: str = problem.title
        self.detail: str = problem.detail
        self.faults: tuple[Fault, ...] = problem.errors
        places = (f"  {fault.pointer}: {fault.detail}" for fault in self.faults)
        super().__init__("\n".join((f"{self.status} {self.title}: {self.detail}", *places)))


class InvalidChain(RequestRefused):
    """The body is no JSON (400) or no valid chain (422)."""


class ServiceUnavailable(StagesumError):  # noqa: N818
    """The service can't be reached or is too busy; the same request may be answered later."""


class UnexpectedAnswer(StagesumError):  # noqa: N818
    """The answer is not one that this client can read."""
