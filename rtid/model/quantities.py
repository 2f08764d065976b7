"""Engineering quantities with 95 % limits; unknown is None and never a guess."""

from __future__ import annotations

import math

import numpy as np

from rtid.identify.delta import quantity_jacobian
from rtid.identify.structure import Fit, Structure
from rtid.report import Quantity

NORMAL_95 = 1.959964
UNKNOWN = 0.15  # standard error of ln|value| above which a quantity is unknown
_REMEMBERED_ROWS = 60

NAMES: dict[int, tuple[str, ...]] = {
    1: ("gain", "time_constant_1", "dead_time", "offset", "noise"),
    2: (
        "gain", "natural_frequency", "damping_ratio", "time_constant_1", "time_constant_2", "dead_time", "offset",
        "noise",
    ),
}  # fmt: skip


def units_of(input_unit: str, output_unit: str) -> dict[str, str]:
    """Unit of every quantity; a unit that was not given is written 1."""
    over = f"{output_unit or '1'}/{input_unit or '1'}"
    return {
        "gain": over if output_unit or input_unit else "1",
        "natural_frequency": "rad/s", "damping_ratio": "1", "time_constant_1": "s", "time_constant_2": "s",
        "dead_time": "s", "offset": output_unit or "1", "noise": output_unit or "1",
    }  # fmt: skip


def unknown(order: int, units: dict[str, str]) -> dict[str, Quantity]:
    """Every quantity of a model that is not there yet."""
    return {name: Quantity(None, None, None, None, units[name]) for name in NAMES[order]}


def quantities(
    structure: Structure, fit: Fit, units: dict[str, str], *, output_shift: float = 0.0
) -> dict[str, Quantity]:
    """All quantities of a fit. `output_shift`: how much later than its tick the output was taken, s (averaging)."""
    values, jacobian = quantity_jacobian(structure, fit)
    with np.errstate(invalid="ignore"):
        errors = dict(zip(values, np.sqrt(np.diag(jacobian @ fit.covariance @ jacobian.T)).tolist(), strict=True))
    found = {name: _logarithmic(value, errors[name], units[name]) for name, value in values.items()}
    delay_error = math.hypot(errors["dead_time"], fit.delay_error * structure.period)
    limit = max(structure.period, UNKNOWN * (values["dead_time"] + structure.slowest(fit)))
    found["dead_time"] = _linear(values["dead_time"] + output_shift, delay_error, units["dead_time"], limit=limit)
    found["offset"] = _linear(values["offset"], errors["offset"], units["offset"])
    found["noise"] = _noise(fit, units["noise"])
    return found


def _logarithmic(value: float, error: float, unit: str) -> Quantity:
    if not (math.isfinite(value) and math.isfinite(error) and error <= UNKNOWN):
        return Quantity(None, None, None, None, unit)
    ends = sorted((value * math.exp(-NORMAL_95 * error), value * math.exp(NORMAL_95 * error)))
    return Quantity(value, abs(value) * error, ends[0], ends[1], unit)


def _linear(value: float, error: float, unit: str, *, limit: float = math.inf) -> Quantity:
    if not (math.isfinite(value) and math.isfinite(error) and error <= limit):
        return Quantity(None, None, None, None, unit)
    return Quantity(value, error, value - NORMAL_95 * error, value + NORMAL_95 * error, unit)


def _noise(fit: Fit, unit: str) -> Quantity:
    """Deviation of the output's noise; its error counts how long the noise remembers itself (Bartlett's formula)."""
    rows = max(fit.noise_rows, 2.0)
    error = fit.noise * math.sqrt(_remembered(fit) / (2.0 * rows))
    return Quantity(fit.noise, error, max(0.0, fit.noise - NORMAL_95 * error), fit.noise + NORMAL_95 * error, unit)


def _remembered(fit: Fit) -> float:
    """1 + 2Σρ² of the noise's autocorrelation ρ."""
    if len(fit.ar) == 0:
        return 1.0
    a, impulse = fit.ar.tolist(), [1.0]
    while len(impulse) < _REMEMBERED_ROWS:
        impulse.append(-sum(c * v for c, v in zip(a, reversed(impulse), strict=False)))
    covariance = np.correlate(impulse, impulse, mode="full")[len(impulse) - 1 :]
    rho = covariance / covariance[0]
    return float(1.0 + 2.0 * (rho[1:] ** 2).sum())
