"""Calibration at one or two points (model.md, section 5)."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from stagesum_server.engine import sensitivity

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from stagesum_server.engine.chain import Model

    Array = NDArray[np.float64]


def weights(v: Array, v_cal: Array) -> tuple[Array, float | None]:
    """Weights of the calibration points' errors, and v(c2) - v(c1) where there are two.

    One point: e(p) - e(c). Two: the line through both, w2 = (v(p) - v(c1)) / (v(c2) - v(c1)), w1 = 1 - w2.
    ``v`` has shape (points,), ``v_cal`` (calibration points,); the weights (points, calibration points).
    """
    if v_cal.size == 1:
        return np.ones((v.size, 1)), None
    step = float(v_cal[1] - v_cal[0])
    w2 = (v - v_cal[0]) / step
    return np.stack([1.0 - w2, w2], axis=1), step


def can_collapse(model: Model) -> bool:
    """Whether errors inside their bounds could make the two calibration readings equal (first order)."""
    if model.calibration is None or model.calibration.step is None:
        return False
    count, reach = len(model.points), 0.0
    for variable in model.variables:
        s = sensitivity.site_sensitivity(model, variable)
        between = abs(float(s[count + 1] - s[count]))
        reach += between * max(abs(variable.law.lower), abs(variable.law.upper))
    return reach >= abs(model.calibration.step)
