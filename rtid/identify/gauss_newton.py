"""Robust Gauss-Newton fit of an output-error model to a record, with initial states and noise whitening.

Levenberg-Marquardt damping; Huber's weights at three deviations (Huber 1964); the noise's autoregression is found
anew between the rounds (Ljung, System Identification, 2nd ed., sec. 10.2).
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from rtid.identify.bounded import bounded_step
from rtid.identify.record import Record
from rtid.identify.recursion import all_pole
from rtid.identify.simulated import Plant, run_record
from rtid.identify.structure import Fit
from rtid.identify.whitening import LONG_RUN_LAGS, MAX_ORDER, Whitener, autocovariance, autoregression, long_run_ratio

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

HUBER = 3.0
SIGMA_FLOOR = 1e-5  # of the output's deviation: noise-free data must not make infinite weights
SINGULAR = 1e-12  # of unit-scaled sensitivities: what the record does not inform gets a huge variance, not an error
_SILENT = 1e-60  # power of a sensitivity that is nothing
_STEP_LIMIT = 1.0  # on logarithms


@dataclass(frozen=True, slots=True)
class Point:
    """A fit and what it leaves on the record: whitened residual e (N,), φ (N, p + states), rows that count (N,)."""

    fit: Fit
    states: Array
    residual: Array
    e: Array
    phi: Array
    ok: Mask
    loss: float


class RecordFit:
    """Fits one record; holds what does not change between the iterations.

    `moving`: the plant may still be on its way, so the level may follow a parabola through the record.
    """

    def __init__(self, plant: Plant, record: Record, *, moving: bool = False) -> None:
        self.plant = plant
        self.record = record
        time = np.linspace(-1.0, 1.0, len(record))
        self._trend = np.column_stack((time, time**2 - 1.0 / 3.0)) if moving else np.empty((len(record), 0))
        self._nuisances = plant.order + self._trend.shape[1]
        finite = record.output[np.isfinite(record.output)]
        self.spread = float(np.std(finite)) if len(finite) else 0.0

    def point(self, fit: Fit, states: Array) -> Point:
        """Evaluate at `fit` with the nuisance parameters: the model's initial states, then the trend."""
        residual, psi, ok, predictor = run_record(self.plant, self.record, fit)
        free = np.hstack((self._free_response(predictor.simulators[0].model.f), self._trend))
        residual = residual - free @ states
        whitener = Whitener(psi.shape[1] + free.shape[1])
        whitener.coefficients = fit.ar
        e, phi, good = whitener.run(residual, np.hstack((psi, free)), ok)
        return Point(fit, states, residual, e, phi, good, _huber_loss(e[good], fit.sigma))

    def polish(self, fit: Fit, *, rounds: int = 6, steps: int = 12) -> Point:
        """Converge from `fit`. `rounds` renew the noise model, each with at most `steps` iterations.

        The first steps take the noise for white: a coloured model found far off would whiten the misfit away.
        """
        now = self._renew_noise(self.point(fit, np.zeros(self._nuisances)), orders=0)
        now = self._descend(now, steps)
        for _ in range(rounds):
            now = self._renew_noise(now)
            before = now.fit.theta
            now = self._descend(now, steps)
            deviation = np.sqrt(np.maximum(np.diag(self.covariance(now)), 1e-300))
            if np.all(np.abs(now.fit.theta - before)[self.plant.free] < 0.01 * deviation[self.plant.free]):
                break
        now = self._renew_noise(now)
        return replace(now, fit=replace(now.fit, covariance=self.covariance(now), rows=int(now.ok.sum())))

    def covariance(self, point: Point) -> Array:
        """Of θ, nuisance parameters eliminated, what is left of the noise's colour counted; 0 for what is known."""
        columns = self._columns()
        phi = point.phi[point.ok][:, columns]
        scale = np.sqrt(np.maximum((phi**2).sum(axis=0), _SILENT))
        normal = (phi / scale).T @ (phi / scale)
        normal[np.diag_indices_from(normal)] += SINGULAR
        inverse = np.linalg.inv(normal)
        full = np.zeros((len(columns), len(columns)))
        clipped = np.clip(point.e, -HUBER * point.fit.sigma, HUBER * point.fit.sigma)
        understated = long_run_ratio(autocovariance(clipped, point.ok, LONG_RUN_LAGS))
        full[np.ix_(columns, columns)] = inverse / np.outer(scale, scale) * point.fit.sigma**2 * understated
        p = len(self.plant.names)
        return full[:p, :p]

    def _columns(self) -> Mask:
        return np.concatenate((self.plant.free, np.ones(self._nuisances, dtype=np.bool_)))

    def _free_response(self, f: Array) -> Array:
        """What the model output shows of its own past before the record, one column per initial state, (N, order)."""
        impulse = np.zeros(len(self.record))
        impulse[0] = 1.0
        end = self.record.starts[1] if len(self.record.starts) > 1 else len(impulse)
        response = all_pole(impulse, f, (0.0, 0.0))[0]
        response[end:] = 0.0
        later = np.concatenate(([0.0], response[:-1]))
        return np.column_stack((response, later)[: self.plant.order])

    def _renew_noise(self, point: Point, *, orders: int = MAX_ORDER) -> Point:
        rows = float(point.ok.sum())
        limit = HUBER * 1.4826 * float(np.median(np.abs(point.residual[point.ok]))) if rows else 0.0
        clipped = np.clip(point.residual, -limit, limit) if limit > 0 else point.residual
        covariance = autocovariance(np.where(point.ok, clipped, 0.0), point.ok, orders)
        noise = float(np.sqrt(covariance[0]))
        fit = replace(point.fit, ar=autoregression(covariance, rows), noise=noise, noise_rows=rows)
        whitened = self.point(fit, point.states)
        sigma = self._sigma(whitened.e[whitened.ok])
        loss = _huber_loss(whitened.e[whitened.ok], sigma)
        return replace(whitened, fit=replace(fit, sigma=sigma), loss=loss)

    def _sigma(self, e: Array) -> float:
        robust = 1.4826 * float(np.median(np.abs(e))) if len(e) else 0.0
        return max(robust, SIGMA_FLOOR * self.spread, self.plant.least_noise, 1e-12)

    def _descend(self, now: Point, steps: int) -> Point:
        damping = 1e-3
        for _ in range(steps):
            better = None
            while better is None and damping < 1e6:
                candidate = self._try(now, damping)
                if candidate.loss < now.loss:
                    better = candidate
                else:
                    damping *= 10.0
            if better is None:
                break
            small = now.loss - better.loss < 1e-9 * (1.0 + now.loss)
            now, damping = better, max(damping * 0.1, 1e-9)
            if small:
                break
        return now

    def _try(self, now: Point, damping: float) -> Point:
        step = self._step(now, damping)
        if not np.isfinite(step).all():
            return replace(now, loss=np.inf)
        p = len(now.fit.theta)
        theta = self.plant.within(now.fit.theta + step[:p])
        return self.point(replace(now.fit, theta=theta), now.states + step[p:])

    def _step(self, now: Point, damping: float) -> Array:
        columns = self._columns()
        e, phi = now.e[now.ok], now.phi[now.ok][:, columns]
        bound = HUBER * now.fit.sigma
        weight = bound / np.maximum(np.abs(e), bound)
        scale = np.sqrt(np.maximum((phi**2).sum(axis=0), _SILENT))
        scaled = phi / scale
        normal = (scaled * weight[:, None]).T @ scaled
        normal[np.diag_indices_from(normal)] *= 1.0 + damping
        normal[np.diag_indices_from(normal)] += SINGULAR
        anywhere = np.full(self._nuisances, np.inf)
        low, high = self.plant.box(now.fit.theta, logarithm=_STEP_LIMIT, rows=2.0)
        low, high = np.concatenate((low, -anywhere))[columns] * scale, np.concatenate((high, anywhere))[columns] * scale
        step = np.zeros(len(columns))
        step[columns] = bounded_step(normal, scaled.T @ (weight * e), low, high) / scale
        return step


def best(points: list[Point]) -> Point:
    """The point with the smallest loss, all measured with the smallest deviation among them."""
    sigma = min(point.fit.sigma for point in points)
    return min(points, key=lambda point: _huber_loss(point.e[point.ok], sigma))


def _huber_loss(e: Array, sigma: float) -> float:
    size = np.abs(e) / max(sigma, 1e-300)
    return float(np.where(size <= HUBER, 0.5 * size**2, HUBER * size - 0.5 * HUBER**2).sum())
