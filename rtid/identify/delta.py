"""Propagation of uncertainty from parameters to engineering quantities: the delta method."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rtid.identify.structure import Fit, Structure

Array = NDArray[np.float64]


def is_linear(name: str) -> bool:
    """Dead times, offset and the gains of later inputs; of all others the logarithm of the size is estimated."""
    return name == "offset" or name.startswith(("dead_time", "gain_"))



def quantity_jacobian(structure: Structure, fit: Fit) -> tuple[dict[str, float], Array]:
    """Values at the fit, and ∂quantity/∂θ, (q, p): of ln|value|, but of the value itself where `is_linear`.

    Central differences with steps of 1e-4 standard errors, or 1e-6 where that is unknown. Rows of quantities that do
    not exist at the fit are NaN.
    """
    centre = structure.quantities(fit.theta, fit)
    deviation = np.sqrt(np.maximum(np.diag(fit.covariance), 0.0))
    steps = np.where(np.isfinite(deviation) & (deviation > 0.0), np.minimum(1e-4 * deviation, 1e-4), 1e-6)
    columns = []
    for i, step in enumerate(steps):
        ends = []
        for signed in (step, -step):
            theta = fit.theta.copy()
            theta[i] += signed
            ends.append(_scaled(structure.quantities(theta, fit)))
        columns.append((ends[0] - ends[1]) / (2.0 * step))
    return centre, np.column_stack(columns)


def _scaled(values: dict[str, float]) -> Array:
    with np.errstate(divide="ignore", invalid="ignore"):
        return np.array([v if is_linear(name) else np.log(np.abs(v)) for name, v in values.items()])
