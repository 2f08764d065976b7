"""The structure `output_error`: y = G(q)u + offset + v with autoregressive noise A(q)v = e, in log-physical parameters.

The model output is simulated from the input alone, so a noisy sensor biases nothing (Ljung, System Identification,
2nd ed., sec. 4.2 and 7.5).
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from rtid.identify.following import FollowingEstimator
from rtid.identify.gauss_newton import Point, RecordFit, best
from rtid.identify.record import Record
from rtid.identify.simulated import Plant, SimulatedPredictor, run_record
from rtid.identify.start import candidates, liveliest_part
from rtid.identify.structure import Fit
from rtid.identify.whitening import LONG_RUN_LAGS, Whitener, autocovariance, long_run_ratio

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

MIN_ROWS = 200
MIN_TIME_CONSTANTS = 5.0
START_ERROR = 0.2  # standard error of ln|gain| and ln(time constant) at which an estimate is worth publishing
_NEIGHBOURS = (-1.0, -0.5, 0.5, 1.0)  # rows: the loss has a local minimum in every sample interval of the dead time


class OutputError:
    """`structure.Structure` for simulated models of order 1 or 2 with one or several inputs.

    `least_noise`: deviation below which the output cannot be read, in its unit.
    """

    def __init__(
        self, order: int, period: float, dead_time: tuple[float, float], *, inputs: int = 1, least_noise: float = 0.0
    ) -> None:
        self._plant = Plant(order, period, dead_time, inputs=inputs, least_noise=least_noise)
        self.names = self._plant.names
        self.period = period

    def first_fit(self, record: Record) -> Fit | None:
        if len(record) < MIN_ROWS:
            return None
        point = self._from_grid(record)
        if point is None:
            return None
        fit = point.fit
        errors = np.sqrt(np.diag(fit.covariance))[: 1 + self._plant.order]
        long_enough = fit.rows * self.period >= MIN_TIME_CONSTANTS * self.slowest(fit)
        return fit if bool((errors < START_ERROR).all()) and long_enough else None

    def refit(self, record: Record, fit: Fit, *, thorough: bool = False, moving: bool = False) -> Fit:
        whole = RecordFit(self._plant, record, moving=moving)
        points = [whole.polish(fit)]
        if thorough:
            found = self._from_grid(record)
            points += [found] if found else []
            return self._leave_local_minima(whole, best(points)).fit
        return best(points).fit

    def run(self, record: Record, fit: Fit) -> tuple[Array, Array, Mask, SimulatedPredictor]:
        return run_record(self._plant, record, fit)

    def estimator(self, fit: Fit, record: Record, *, memory: float) -> FollowingEstimator:
        return FollowingEstimator(self._plant, fit, record, memory=memory)

    def relative_gain(self, record: Record, fit: Fit) -> tuple[float, float] | None:
        """Least squares of the whitened residual on the whitened output of the model and a level."""
        residual, psi, ok, _ = run_record(self._plant, record, fit)
        whitener = Whitener(psi.shape[1])
        whitener.coefficients = fit.ar
        e, phi, good = whitener.run(residual, psi, ok)
        columns = phi[good][:, [0, -1]]
        if len(columns) < MIN_ROWS // 2 or np.linalg.cond(columns.T @ columns) > 1e12:
            return None
        solution = np.linalg.lstsq(columns, e[good], rcond=None)[0]
        left = e[good] - columns @ solution
        colour = long_run_ratio(autocovariance(left, np.ones(len(left), dtype=np.bool_), LONG_RUN_LAGS))
        variance = np.linalg.inv(columns.T @ columns)[0, 0] * float(left @ left) / len(left) * colour
        return 1.0 + float(solution[0]), float(np.sqrt(variance))

    def quantities(self, theta: Array, fit: Fit) -> dict[str, float]:
        return self._plant.quantities(theta, fit)

    def slowest(self, fit: Fit) -> float:
        return self._plant.time_constants(fit.theta)[0]

    def settling_rows(self, fit: Fit) -> int:
        return self._plant.settling_rows(fit.theta)

    def transfer(self, fit: Fit) -> list[tuple[Array, Array, int]]:
        order = self._plant.order
        return [
            (np.concatenate(([0.0], model.b[: order + 1])), np.concatenate(([1.0], model.f[:order])), model.d)
            for model in self._plant.models(fit.theta, fit.sign)
        ]

    def _from_grid(self, record: Record) -> Point | None:
        starts = candidates(self._plant, record)
        if not starts:
            return None
        part = RecordFit(self._plant, liveliest_part(record))
        found = best([part.polish(start, rounds=3) for start in starts])
        return RecordFit(self._plant, record).polish(self._leave_local_minima(part, found).fit)

    def _leave_local_minima(self, whole: RecordFit, point: Point) -> Point:
        if not self._plant.free[-2]:
            return point
        for _ in range(8):
            places = self._plant.dead_times
            shifted = [self._shifted(point.fit, place, rows) for place in places for rows in _NEIGHBOURS]
            winner = best([point, *(whole.polish(fit, rounds=2) for fit in shifted)])
            if winner is point:
                return point
            point = winner
        return point

    def _shifted(self, fit: Fit, place: int, rows: float) -> Fit:
        theta = fit.theta.copy()
        theta[place] += rows * self.period
        return replace(fit, theta=self._plant.within(theta))
