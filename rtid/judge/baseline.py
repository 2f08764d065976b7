"""The baseline: what the plant was when it was accepted, how well that is known, and the model that runs on from it."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rtid.identify.delta import is_linear, quantity_jacobian
from rtid.identify.record import Record, blank_record
from rtid.identify.structure import Fit, Predictor, Structure
from rtid.identify.whitening import Whitener
from rtid.kept import Kept

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

PROMISED_ROWS = 3000  # below, the false-alarm budget is not promised
INFORMED = 0.15  # standard error of ln|quantity|
MIN_TIME_CONSTANTS = 20.0
_CLIP = 4.0
_UNTOLD = 1e6  # variance of a parameter of which the baseline's data said nothing
_AGREEMENT = 4.0  # standard errors between the halves of a stationary record


@dataclass(frozen=True, slots=True)
class Baseline:
    """covariance: (p, p) of θ with the residual's own correlation counted; unit: deviation of e; gamma0: mean φφT."""

    fit: Fit
    covariance: Array
    unit: float
    gamma0: Array
    values: dict[str, float]
    jacobian: Array
    stamp: float


@dataclass(frozen=True, slots=True)
class Refusal:
    """Why there is no baseline yet; `stale_half`: the older half of the record is to be dropped."""

    reason: str
    stale_half: bool = False


class Follower(Kept):
    """The accepted model beside the plant: innovations and their sensitivities, in units of its noise."""

    KEPT = ("_predictor", "_whitener")

    def __init__(self, predictor: Predictor, whitener: Whitener, unit: float) -> None:
        self._predictor = predictor
        self._whitener = whitener
        self._unit = unit

    def run(self, inputs: Array, output: Array, ok: Mask) -> tuple[Array, Array]:
        e, phi, good = self._whitener.run(*self._predictor.run(inputs, output, ok))
        return e[good] / self._unit, phi[good] / self._unit

    def restart(self, inputs: Array) -> None:
        self._predictor.restart(inputs)
        self._whitener.break_off()


def follower_of(structure: Structure, baseline: Baseline) -> Follower:
    """The model of an old baseline, at the steady state of its mean inputs."""
    fit = baseline.fit
    whitener = Whitener(len(fit.theta))
    whitener.coefficients = fit.ar
    return Follower(structure.run(blank_record(fit.centre), fit)[3], whitener, baseline.unit)


def accept(
    structure: Structure, record: Record, fit: Fit, *, tolerances: dict[str, float], stamp: float
) -> tuple[Baseline, Follower] | Refusal:
    """A baseline fitted on the whole record, or why it is refused. `tolerances`: fraction of each quantity."""
    fit = structure.refit(record, fit, thorough=True)
    refusal = _uninformed(structure, fit) or _unsteady(structure, record, fit, tolerances)
    if refusal:
        return refusal
    residual, psi, ok, predictor = structure.run(record, fit)
    whitener = Whitener(len(fit.theta))
    whitener.coefficients = fit.ar
    e, phi, good = whitener.run(residual, psi, ok)
    baseline = _describe(structure, fit, e[good], phi[good], stamp=stamp)
    if baseline is None:
        return Refusal("learning: the data do not tell the parameters apart (singular); the input must move more")
    return baseline, Follower(predictor, whitener, baseline.unit)


def _uninformed(structure: Structure, fit: Fit) -> Refusal | None:
    needed = MIN_TIME_CONSTANTS * structure.slowest(fit) / structure.period
    if fit.rows < needed:
        return Refusal(f"learning: {fit.rows} rows are less than 20 time constants ({needed:.0f} rows)")
    unknown = ill_known(structure, fit)
    return Refusal(f"learning: {unknown} is not known well enough yet; the input must move more") if unknown else None


def ill_known(structure: Structure, fit: Fit) -> str | None:
    """The first of gain and main dynamics that the fit does not know to INFORMED; None when it knows them."""
    values, jacobian = quantity_jacobian(structure, fit)
    with np.errstate(invalid="ignore"):
        errors = np.sqrt(np.diag(jacobian @ fit.covariance @ jacobian.T))
    dynamics = "time_constant_1" if np.isfinite(values["time_constant_1"]) else "natural_frequency"
    known = {name for name, error in zip(values, errors, strict=True) if error < INFORMED}
    return next((name for name in ("gain", dynamics) if name not in known), None)


def _unsteady(structure: Structure, record: Record, fit: Fit, tolerances: dict[str, float]) -> Refusal | None:
    """The halves of the record, fitted alone, must agree within their errors or within half the tolerance."""
    halves = [structure.refit(half, fit) for half in record.halves()]
    values, jacobian = quantity_jacobian(structure, fit)
    ends = [structure.quantities(half.theta, half) for half in halves]
    spread = jacobian @ (halves[0].covariance + halves[1].covariance) @ jacobian.T
    for i, (name, value) in enumerate(values.items()):
        if name == "offset" or not np.isfinite([value, ends[0][name], ends[1][name]]).all():
            continue
        before, after = ends[0][name], ends[1][name]
        least = structure.period if name.startswith("dead_time") else 0.0
        allowed = 0.5 * max(tolerances.get(name, 0.0) * abs(value), least)
        error = float(np.sqrt(spread[i, i])) * (1.0 if is_linear(name) else abs(value))
        if abs(after - before) > max(allowed, _AGREEMENT * error):
            text = f"learning: {name} moved from {before:.4g} to {after:.4g} while learning; the older half was dropped"
            return Refusal(text, stale_half=True)
    return None


def _describe(structure: Structure, fit: Fit, e: Array, phi: Array, *, stamp: float) -> Baseline | None:
    unit0 = max(1.4826 * float(np.median(np.abs(e))), fit.sigma * 1e-3)
    psi = np.clip(e / unit0, -_CLIP, _CLIP)
    power = float(np.mean(psi**2))
    kept = float(np.mean(np.abs(e / unit0) < _CLIP))
    scaled = phi / unit0
    gamma = power * (scaled.T @ scaled) / len(e)
    inflation = max(1.0, _correlation_inflation(scaled * psi[:, None], gamma))
    unit = unit0 * np.sqrt(power * inflation)
    gamma0 = (phi.T @ phi) / len(e) / unit**2
    free = np.diag(gamma0) > 0.0
    block = kept * gamma0[np.ix_(free, free)] * len(e)
    if not np.linalg.cond(block / np.sqrt(np.outer(np.diag(block), np.diag(block)))) < 1e10:
        return None
    covariance = np.zeros_like(gamma0)
    covariance[np.ix_(free, free)] = np.linalg.inv(block) / kept
    silent = ~free & (np.diag(fit.covariance) > 0.0)
    covariance[silent, silent] = np.minimum(np.diag(fit.covariance)[silent], _UNTOLD)
    known = np.diag(fit.covariance) == 0.0
    covariance[known, :] = covariance[:, known] = 0.0
    accepted = replace(fit, covariance=covariance)
    values, jacobian = quantity_jacobian(structure, accepted)
    return Baseline(accepted, covariance, float(unit), gamma0, values, jacobian, stamp)


def _correlation_inflation(products: Array, gamma: Array) -> float:
    """tr(Γ⁻¹Γ_HAC)/n with a Bartlett window (Newey & West, Econometrica 55, 1987)."""
    rows = len(products)
    lags = int(2.0 * rows ** (1.0 / 3.0))
    total = products.T @ products / rows
    for lag in range(1, lags + 1):
        cross = products[lag:].T @ products[:-lag] / rows
        total = total + (1.0 - lag / (lags + 1.0)) * (cross + cross.T)
    scale = np.sqrt(np.maximum(np.diag(gamma), 1e-300))
    sizes = np.outer(scale, scale)
    ratio = np.linalg.pinv(gamma / sizes, rcond=1e-9, hermitian=True) @ (total / sizes)
    return float(np.trace(ratio) / np.linalg.matrix_rank(gamma / sizes))
