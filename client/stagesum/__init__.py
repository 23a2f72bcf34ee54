"""Error budgets of measuring chains: the thin client.

``Client().budget(chain)`` asks a service, or the one inside this process, and returns the records
of :mod:`stagesum_schemas.records`. All that is meant to be used is named here.
"""

from importlib.metadata import PackageNotFoundError, version

from stagesum_schemas.records import (
    Budget,
    Checks,
    Contribution,
    Fault,
    Histogram,
    Interval,
    Largest,
    MonteCarlo,
    Point,
    PointConvolution,
    PointMonteCarlo,
    Problem,
    Rss,
    Service,
    VarianceParts,
    Verdict,
    WorstCase,
)

from stagesum.client import Client
from stagesum.errors import (
    InvalidAddress,
    InvalidChain,
    MissingExtra,
    RequestRefused,
    ServiceUnavailable,
    StagesumError,
    UnexpectedAnswer,
)

try:
    __version__ = version("stagesum")
except PackageNotFoundError:  # run from the source without being installed
    __version__ = "0"

__all__ = [
    "Budget",
    "Checks",
    "Client",
    "Contribution",
    "Fault",
    "Histogram",
    "Interval",
    "InvalidAddress",
    "InvalidChain",
    "Largest",
    "MissingExtra",
    "MonteCarlo",
    "Point",
    "PointConvolution",
    "PointMonteCarlo",
    "Problem",
    "RequestRefused",
    "Rss",
    "Service",
    "ServiceUnavailable",
    "StagesumError",
    "UnexpectedAnswer",
    "VarianceParts",
    "Verdict",
    "WorstCase",
    "__version__",
]
