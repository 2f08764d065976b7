"""How far each quantity is from the baseline, against its tolerance, and which one is surest beyond it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtid.identify.delta import is_linear, quantity_jacobian
from rtid.identify.structure import Fit, Structure
from rtid.judge.baseline import Baseline

Array = NDArray[np.float64]

SURE = 2.0  # standard errors
_SEEN = 4.0  # standard errors from which a change within tolerance is named
_LEAD = 1.5
_REVERSED = 10.0  # standard errors credited to a change of sign
_COMPARABLE = 0.5  # standard error of a logarithm


@dataclass(frozen=True, slots=True)
class QuantityChange:
    """Change of one quantity against the baseline in percent, with 95 % limits, and its tolerance in percent."""

    name: str
    change_pct: float
    low_pct: float
    high_pct: float
    tolerance_pct: float
    surety: float  # standard errors between no change and the present change

    @property
    def beyond(self) -> bool:
        """Surely more than the tolerance."""
        return self.low_pct > self.tolerance_pct or self.high_pct < -self.tolerance_pct

    @property
    def within(self) -> bool:
        """Surely no more than the tolerance."""
        return self.high_pct < self.tolerance_pct and self.low_pct > -self.tolerance_pct

    @property
    def margin(self) -> float:
        """Standard errors by which the change is beyond the tolerance; negative while it is inside."""
        error = max((self.high_pct - self.low_pct) / (2.0 * SURE), 1e-9)
        return (abs(self.change_pct) - self.tolerance_pct) / error


class Judged:
    """The quantities of one baseline that have a tolerance and that the baseline knows."""

    def __init__(self, structure: Structure, baseline: Baseline, tolerances: dict[str, float]) -> None:
        self._structure = structure
        self._baseline = baseline
        self._tolerances = tolerances
        known = [name for i, name in enumerate(baseline.values) if _told(baseline, i, name, tolerances)]
        if "time_constant_2" in known:
            known = [name for name in known if name not in ("natural_frequency", "damping_ratio")]
        self.names = known
        rows = [list(baseline.values).index(name) for name in known]
        self._gradient = baseline.jacobian[rows]
        spread = self._gradient @ baseline.covariance @ self._gradient.T
        self._baseline_variance = dict(zip(known, np.diag(spread).tolist(), strict=True))

    def assess(self, fit: Fit) -> list[QuantityChange]:
        """Every judged quantity of a fit against the baseline; those that do not exist at the fit are left out."""
        values, jacobian = quantity_jacobian(self._structure, fit)
        variances = np.diag(jacobian @ fit.covariance @ jacobian.T).tolist()
        own = dict(zip(values, variances, strict=True))
        changes = [self._one(name, values[name], own[name], fit) for name in self.names if np.isfinite(own[name])]
        return [change for change in changes if np.isfinite(change.surety)]

    def half_used(self, delta: Array) -> bool:
        """Whether parameters that moved by `delta`, (p,), move any quantity by more than half its tolerance."""
        moved = zip(self.names, np.abs(self._gradient @ delta).tolist(), strict=True)
        return any(m > 0.5 * self._allowed(name) * self._size(name) for name, m in moved)

    def gain_change(self, ratio: float, error: float) -> QuantityChange:
        """A gain that is `ratio` times the baseline's, with its standard error; the baseline's own is counted."""
        spread = float(np.hypot(error, ratio * np.sqrt(self._baseline_variance["gain"])))
        ends = [100.0 * (ratio - 1.0 + k * spread) for k in (0.0, -SURE, SURE)]
        tolerance = 100.0 * self._allowed("gain")
        return QuantityChange("gain", ends[0], ends[1], ends[2], tolerance, abs(ratio - 1.0) / spread)

    @property
    def gain_gradient(self) -> Array:
        """∂ln|gain|/∂θ at the baseline, (p,)."""
        return np.asarray(self._gradient[self.names.index("gain")])

    def _allowed(self, name: str) -> float:
        """Tolerance as a difference of logarithms; of the dead time in seconds, one row at the least."""
        if name.startswith("dead_time"):
            return max(self._tolerances[name] * self._baseline.values[name], self._structure.period)
        return self._tolerances[name]

    def _size(self, name: str) -> float:
        """What one unit of `_allowed` is in the units of the Jacobian's row."""
        gain_of_its_own = is_linear(name) and not name.startswith("dead_time")
        return abs(self._baseline.values[name]) if gain_of_its_own else 1.0

    def _one(self, name: str, value: float, variance: float, fit: Fit) -> QuantityChange:
        before = self._baseline.values[name]
        if name.startswith("dead_time"):
            variance += (fit.delay_error**2 + self._baseline.fit.delay_error**2) * self._structure.period**2
            return self._dead_time(name, value - before, variance + self._baseline_variance[name])
        if value == 0.0 or (value > 0.0) != (before > 0.0):
            return self._reversed(name, value, before)
        if is_linear(name):
            spread = variance / value**2 + self._baseline_variance[name] / before**2
        else:
            spread = variance + self._baseline_variance[name]
        error = max(float(np.sqrt(spread)), 1e-12)
        delta = float(np.log(value / before))
        ends = [100.0 * float(np.expm1(min(delta + k * error, 20.0))) for k in (0.0, -SURE, SURE)]
        return QuantityChange(name, ends[0], ends[1], ends[2], 100.0 * self._allowed(name), abs(delta) / error)

    def _reversed(self, name: str, value: float, before: float) -> QuantityChange:
        """The sign has changed: below -100 % for certain."""
        change = 100.0 * (value / before - 1.0)
        return QuantityChange(name, change, 2.0 * change, -100.0, 100.0 * self._allowed(name), _REVERSED)

    def _dead_time(self, name: str, delta: float, variance: float) -> QuantityChange:
        error = float(np.sqrt(variance))
        scale = 100.0 / max(self._baseline.values[name], self._structure.period)
        ends = [scale * (delta + k * error) for k in (0.0, -SURE, SURE)]
        tolerance = scale * self._allowed(name)
        return QuantityChange(name, ends[0], ends[1], ends[2], tolerance, abs(delta) / max(error, 1e-12))


def surest(changes: list[QuantityChange]) -> QuantityChange:
    """The one surest beyond its tolerance; while none is, the one whose change is surest."""
    beyond = [q for q in changes if q.beyond]
    return max(beyond, key=lambda q: q.margin) if beyond else max(changes, key=lambda q: q.surety)


def leader(changes: list[QuantityChange]) -> QuantityChange | None:
    """The quantity whose change is clearly the surest; None while it is undecided."""
    ranked = sorted(changes, key=lambda q: q.surety, reverse=True)
    clear = ranked and ranked[0].surety > _SEEN and (len(ranked) == 1 or ranked[0].surety > _LEAD * ranked[1].surety)
    return ranked[0] if clear else None


def _told(baseline: Baseline, i: int, name: str, tolerances: dict[str, float]) -> bool:
    """Named in the tolerances and known by the baseline well enough to be compared with."""
    row = baseline.jacobian[i]
    if name not in tolerances or not np.isfinite(row).all():
        return False
    error = float(np.sqrt(row @ baseline.covariance @ row))
    if name.startswith("dead_time"):
        return error > 0.0 or baseline.fit.delay_error > 0.0
    return error < _COMPARABLE * (abs(baseline.values[name]) if is_linear(name) else 1.0)
