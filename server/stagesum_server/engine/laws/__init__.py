"""Probability laws of error sources.

A law is an object that answers its mean, standard deviation, worst-case bounds, probabilities and quantiles, and
draws values. A new shape is one class here and one line in ``reading.SHAPES``.
"""

from stagesum_server.engine.laws.averaging import AVERAGED_BY_DRAWS, Averaged, averaged
from stagesum_server.engine.laws.base import Law, normal_content
from stagesum_server.engine.laws.bounded import Arcsine, Samples, Trapezoidal, Triangular, TwoPoint, Uniform
from stagesum_server.engine.laws.normal import Normal, StudentT, TruncatedNormal

__all__ = [
    "AVERAGED_BY_DRAWS",
    "Arcsine",
    "Averaged",
    "Law",
    "Normal",
    "Samples",
    "StudentT",
    "Trapezoidal",
    "Triangular",
    "TruncatedNormal",
    "TwoPoint",
    "Uniform",
    "averaged",
    "normal_content",
]
