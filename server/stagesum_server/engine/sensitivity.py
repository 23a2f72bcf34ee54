"""First-order sensitivities: the matrix S that every method reads."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from stagesum_server.engine.chain import Model, Variable

    Array = NDArray[np.float64]


def site_sensitivity(model: Model, variable: Variable) -> Array:
    """Derivative of the output's deviation with respect to a variable, at every site; shape (sites,).

    Output sensitivities of model.md, section 1: a_i: G_i...G_n; b_i: G_(i+1)...G_n; g_i: v_n; n_i: F_i G_(i+1)...G_n.
    """
    tail = model.tail_gains
    match variable.role:
        case "input_offset":
            return variable.factor * float(tail[variable.stage])
        case "output_offset":
            return variable.factor * float(tail[variable.stage + 1])
        case "gain":
            return variable.factor * model.nominal[:, -1]
        case "nonlinearity":
            return variable.factor * float(model.spans[variable.stage] * tail[variable.stage + 1])


def matrix(model: Model) -> Array:
    """Sensitivities of the referred, calibrated error; S has shape (points, variables).

    Calibration is linear in first order: e_cal(p) = e(p) - w1 e(c1) - w2 e(c2) (model.md, section 5).
    """
    D = np.stack([site_sensitivity(model, variable) for variable in model.variables], axis=1)
    count = len(model.points)
    S = D[:count]
    if model.calibration is not None:
        for k in range(model.calibration.weights.shape[1]):
            S = S - model.calibration.weights[:, k : k + 1] * D[count + k]
    return np.asarray(S / model.referral)
