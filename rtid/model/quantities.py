"""Engineering quantities with 95 % limits; unknown is None and never a guess."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from rtid.identify.delta import is_linear, quantity_jacobian
from rtid.identify.structure import Fit, Structure
from rtid.report import Quantity

NORMAL_95 = 1.959964
UNKNOWN = 0.15  # standard error of ln|value| above which a quantity is unknown
_REMEMBERED_ROWS = 60

_DYNAMICS: dict[int, tuple[str, ...]] = {
    1: ("time_constant_1",),
    2: ("natural_frequency", "damping_ratio", "time_constant_1", "time_constant_2"),
}


def names_of(order: int, inputs: int) -> tuple[str, ...]:
    """Every quantity of a model, in the order in which it is published."""
    later = [name for i in range(2, inputs + 1) for name in (f"gain_{i}", f"dead_time_{i}")]
    return ("gain", *_DYNAMICS[order], "dead_time", *later, "offset", "noise")


def units_of(inputs: Sequence[str], output: str) -> dict[str, str]:
    """Unit of every quantity from those of the signals; a unit that was not given is written 1."""
    over = [f"{output or '1'}/{unit or '1'}" if output or unit else "1" for unit in inputs]
    later = {f"gain_{i}": unit for i, unit in enumerate(over[1:], start=2)}
    delays = {f"dead_time_{i}": "s" for i in range(2, len(inputs) + 1)}
    return {
        "gain": over[0], **later, **delays,
        "natural_frequency": "rad/s", "damping_ratio": "1", "time_constant_1": "s", "time_constant_2": "s",
        "dead_time": "s", "offset": output or "1", "noise": output or "1",
    }  # fmt: skip


def unknown(names: Sequence[str], units: dict[str, str]) -> dict[str, Quantity]:
    """Every quantity of a model that is not there yet."""
    return {name: Quantity(None, None, None, None, units[name]) for name in names}


def quantities(
    structure: Structure, fit: Fit, units: dict[str, str], *, output_shift: float = 0.0
) -> dict[str, Quantity]:
    """All quantities of a fit. `output_shift`: how much later than its tick the output was taken, s (averaging)."""
    values, jacobian = quantity_jacobian(structure, fit)
    with np.errstate(invalid="ignore"):
        errors = dict(zip(values, np.sqrt(np.diag(jacobian @ fit.covariance @ jacobian.T)).tolist(), strict=True))
    found = {}
    for name, value in values.items():
        if name.startswith("dead_time"):
            error = math.hypot(errors[name], fit.delay_error * structure.period)
            limit = max(structure.period, UNKNOWN * (value + structure.slowest(fit)))
            found[name] = _linear(value + output_shift, error, units[name], limit=limit)
        elif is_linear(name):
            limit = math.inf if name == "offset" else UNKNOWN * abs(value)
            found[name] = _linear(value, errors[name], units[name], limit=limit)
        else:
            found[name] = _logarithmic(value, errors[name], units[name])
    return found | {"noise": _noise(fit, units["noise"])}


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
