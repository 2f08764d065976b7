"""The output-error estimate that follows the plant, one block at a time.

Recursive prediction-error method (Ljung, System Identification, 2nd ed., ch. 11) in information form, parameters held
for a block; residuals clipped (Huber), offset walking, noise model renewed on the way.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from rtid.identify.bounded import bounded_step
from rtid.identify.forgetting import SubspaceForgetting, informed
from rtid.identify.gauss_newton import HUBER, SIGMA_FLOOR
from rtid.identify.record import Record
from rtid.identify.simulated import Plant, run_record
from rtid.identify.structure import Fit
from rtid.identify.whitening import (
    LONG_RUN_LAGS,
    RunningAutocovariance,
    Whitener,
    autocovariance,
    autoregression,
    long_run_ratio,
)
from rtid.kept import Kept

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_LOG_STEP = 0.3
_SWELL = 1.5  # of the usual deviation: a residual that swells more shows a change of the plant and not the noise
_WILD = 5.0  # deviations of the noise
_SHORTEST = 64  # rows
_FAINT = 1e-6  # of the prior's information: what no datum has told yet stays invertible
_RENEW_EVERY = 8  # blocks between two noise models


class FollowingEstimator(Kept):
    """`structure.Estimator` for an output-error model. `memory`: rows after which a datum counts 1/e."""

    KEPT = (
        "_fit", "_covariance", "_spread", "_prior", "_weight", "_blocks", "invalid", "_predictor",
        "_whitener", "_noise", "_leftover", "_forgetting", "_recent",
    )  # fmt: skip

    def __init__(self, plant: Plant, fit: Fit, record: Record, *, memory: float) -> None:
        self._plant = plant
        self._fit = fit
        self._memory = memory
        residual, psi, ok, self._predictor = run_record(plant, record, fit)
        self._prior = plant.prior(record.inputs, record.output[np.isfinite(record.output)])
        self._spread = float(self._prior[-1])
        self._free = np.flatnonzero(plant.free)
        self._covariance = fit.covariance[np.ix_(self._free, self._free)]
        self._forgetting = self._start_information()
        self._recent = min(1.0, self._short / self._memory) * self._forgetting.window
        ok[: min(plant.settling_rows(fit.theta), len(ok) // 2)] = False  # what came before the record dies down there
        e, _, good = self._start_whitening(residual, psi, ok)
        self._noise = RunningAutocovariance(autocovariance(residual, ok))
        self._leftover = RunningAutocovariance(autocovariance(e, good, LONG_RUN_LAGS))
        self._weight = float(min(memory, max(1, ok.sum())))
        self._blocks = 0
        self.invalid = False

    @property
    def fit(self) -> Fit:
        return self._fit

    def step(self, inputs: Array, output: Array, ok: Mask) -> tuple[Array, Array, Mask]:
        """Learn from the next m rows: residuals e (one step) and ε (simulated) before learning, rows that count."""
        residual, psi, ok = self._predictor.run(inputs, output, ok)
        bound = _WILD * max(self._fit.noise, self._floor)
        e, phi, good = self._whitener.run(np.clip(residual, -bound, bound), psi, ok)  # no echo of one wild row
        self._learn(e[good], phi[good][:, self._free])
        if good.any():
            self._learn_noise(np.where(ok, residual, 0.0), np.where(good, e, 0.0), float(good.sum()))
        return e, residual, good

    def restart(self, inputs: Array) -> None:
        self._predictor.restart(inputs)
        self._whitener.break_off()
        self._noise.break_off()
        self._leftover.break_off()

    def informed(self) -> Mask:
        """Per parameter: at the pace of the last settling time, one memory would tell it to 1/7 of its prior."""
        known = np.zeros(len(self._fit.theta), dtype=np.bool_)
        known[self._free] = informed(self._memory / self._short * self._recent, self._prior[self._free])
        return known

    @property
    def _short(self) -> float:
        """Rows of the window that tells whether data inform now."""
        return min(self._memory, float(max(self._plant.settling_rows(self._fit.theta), _SHORTEST)))

    def _start_whitening(self, residual: Array, psi: Array, ok: Mask) -> tuple[Array, Array, Mask]:
        self._whitener = Whitener(psi.shape[1])
        self._whitener.coefficients = self._fit.ar
        return self._whitener.run(residual, psi, ok)

    def _start_information(self) -> SubspaceForgetting:
        information = np.asarray(np.linalg.inv(self._covariance + 1e-18 * np.eye(len(self._free))), dtype=np.float64)
        prior = self._prior[self._free]
        information += _FAINT * np.diag(1.0 / prior**2)
        share = min(1.0, self._memory / max(1, self._fit.rows))
        return SubspaceForgetting(information, share * information, prior)

    def _learn(self, e: Array, phi: Array) -> None:
        if len(e) == 0:
            return
        sigma = self._fit.sigma
        scaled, unit = phi / sigma, np.clip(e / sigma, -HUBER, HUBER)
        before = self._forgetting.to_state(), self._covariance
        try:
            step = self._update(scaled, unit)
            self.invalid = not (np.isfinite(step).all() and np.isfinite(self._covariance).all())
        except np.linalg.LinAlgError:
            self.invalid = True
        if self.invalid:
            self._forgetting.load_state(before[0])
            self._covariance = before[1]
        else:
            self._move(step)

    def _update(self, scaled: Array, unit: Array) -> Array:
        """Information and covariance with the rows φ (m, p) and residuals (m,), in units of the noise; the step."""
        self._forgetting.forget(float(np.exp(-len(unit) / self._memory)))
        self._walk(len(unit))
        gained = self._forgetting.add(scaled)
        self._recent = np.exp(-len(unit) / self._short) * self._recent + gained
        gain = np.linalg.inv(self._forgetting.information)
        keep = np.eye(len(gain)) - gain @ gained
        understated = long_run_ratio(self._leftover.covariance)
        self._covariance = keep @ self._covariance @ keep.T + understated * (gain @ gained @ gain)
        low, high = self._plant.box(self._fit.theta, logarithm=_LOG_STEP, rows=1.0)
        return bounded_step(self._forgetting.information, scaled.T @ unit, low[self._free], high[self._free])

    def _walk(self, rows: int) -> None:
        """The offset is loose: an unmeasured load must not be read as gain."""
        slowest = self._plant.time_constants(self._fit.theta)[0]
        variance = 1e-4 * self._spread**2 * min(1.0, self._plant.period / slowest) ** 2 * rows
        self._forgetting.loosen(len(self._free) - 1, variance)
        self._covariance = self._covariance.copy()
        self._covariance[-1, -1] += variance

    def _move(self, step: Array) -> None:
        theta = self._fit.theta.copy()
        theta[self._free] += step
        theta = self._plant.within(theta)
        self._predictor.move(theta, theta - self._fit.theta, self._fit.sign)
        p = len(theta)
        covariance = np.zeros((p, p))
        covariance[np.ix_(self._free, self._free)] = self._covariance
        self._fit = replace(self._fit, theta=theta, covariance=covariance, rows=self._fit.rows + 1)

    def _learn_noise(self, residual: Array, e: Array, rows: float) -> None:
        self._weight = min(self._memory, self._weight + rows)
        keep = 1.0 - min(1.0, rows / self._weight)
        usual = max(float(np.sqrt(self._noise.covariance[0])), self._floor)
        present = float(np.sqrt(residual @ residual / rows))
        tamed = np.clip(residual, -4.0 * usual, 4.0 * usual) * min(1.0, _SWELL * usual / max(present, 1e-300))
        self._noise.add(tamed, keep=keep, rows=rows)
        clipped = np.clip(e, -HUBER * self._fit.sigma, HUBER * self._fit.sigma)
        self._leftover.add(clipped, keep=keep, rows=rows)
        self._blocks += 1
        if self._blocks % _RENEW_EVERY == 0:
            self._whitener.coefficients = autoregression(self._noise.covariance, self._weight)
        self._fit = replace(
            self._fit,
            sigma=max(float(np.sqrt(self._leftover.covariance[0])), self._floor),
            noise=float(np.sqrt(self._noise.covariance[0])),
            ar=self._whitener.coefficients,
            noise_rows=self._weight,
        )

    @property
    def _floor(self) -> float:
        return max(SIGMA_FLOOR * self._spread, self._plant.least_noise, 1e-12)
