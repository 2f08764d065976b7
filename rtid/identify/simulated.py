"""The plant in log-physical parameters, simulated beside the real one: over a record, or piece by piece."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from rtid.identify.held import SHAPE_NAMES, HeldMap, held_map
from rtid.identify.record import Record
from rtid.identify.simulator import Simulator
from rtid.identify.structure import Fit
from rtid.kept import Kept

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


class Plant:
    """What stays the same for one loop: order, period and the range in which the dead time lies."""

    def __init__(self, order: int, period: float, dead_time: tuple[float, float]) -> None:
        self.order = order
        self.period = period
        self.dead_time = dead_time
        self.depth = math.ceil(dead_time[1] / period) + 1
        self.names = ("ln_gain", *SHAPE_NAMES[order], "dead_time", "offset")
        self.free = np.ones(len(self.names), dtype=np.bool_)
        self.free[-2] = dead_time[1] > dead_time[0]
        shape_low = [math.log(0.1 * period)] if order == 1 else [math.log(1e-6 / period), math.log(0.01)]
        shape_high = [math.log(1e6 * period)] if order == 1 else [math.log(3.0 / period), math.log(30.0)]
        self.low = np.array([-60.0, *shape_low, dead_time[0], -np.inf])
        self.high = np.array([60.0, *shape_high, dead_time[1], np.inf])
        self.prior = np.array([0.5] * (order + 1) + [3.0 * period, 1.0])  # deviation; the offset's is set by the output

    def model(self, theta: Array, sign: float) -> HeldMap:
        return held_map(self.order, theta[:-1], sign=sign, period=self.period)

    def within(self, theta: Array) -> Array:
        return np.asarray(np.minimum(np.maximum(theta, self.low), self.high))

    def time_constants(self, theta: Array) -> tuple[float, float]:
        """Largest first, seconds; below damping 1 both are 1/(ζω), the time constant of the envelope."""
        if self.order == 1:
            return math.exp(theta[1]), 0.0
        w, z = math.exp(theta[1]), math.exp(theta[2])
        if z < 1.0:
            return 1.0 / (z * w), 1.0 / (z * w)
        root = math.sqrt(z * z - 1.0)
        return (z + root) / w, 1.0 / (w * (z + root))

    def settling_rows(self, theta: Array) -> int:
        """Dead time and five of the largest time constant."""
        return math.ceil((float(theta[-2]) + 5.0 * self.time_constants(theta)[0]) / self.period)

    def quantities(self, theta: Array, fit: Fit) -> dict[str, float]:
        gain = fit.sign * math.exp(theta[0])
        slow, fast = self.time_constants(theta)
        values = {"gain": gain}
        if self.order == 1:
            values["time_constant_1"] = slow
        else:
            damping = math.exp(theta[2])
            real = damping >= 1.0
            values |= {"natural_frequency": math.exp(theta[1]), "damping_ratio": damping}
            values |= {"time_constant_1": slow if real else math.nan, "time_constant_2": fast if real else math.nan}
        return values | {"dead_time": float(theta[-2]), "offset": float(theta[-1] - gain * fit.centre[0])}


class SimulatedPredictor(Kept):
    """`structure.Predictor` of an output-error model."""

    KEPT = ("_centre", "_offset", "simulator")

    def __init__(self, plant: Plant, fit: Fit, level: Array) -> None:
        self._centre = float(fit.centre[0])
        self._offset = float(fit.theta[-1])
        self.simulator = Simulator(plant.model(fit.theta, fit.sign), depth=plant.depth, level=level[0] - self._centre)

    def run(self, inputs: Array, output: Array, ok: Mask) -> tuple[Array, Array, Mask]:
        x, sensitivity = self.simulator.run(inputs[:, 0] - self._centre)
        psi = np.column_stack((sensitivity, np.ones(len(x))))
        return output - x - self._offset, psi, ok & np.isfinite(output)

    def restart(self, inputs: Array) -> None:
        self.simulator.restart(float(inputs[0]) - self._centre)

    def shift(self, theta: Array, model: HeldMap, last_two: tuple[float, float]) -> None:
        """Move to other parameters; the model's last two outputs move by `last_two`."""
        self._offset = float(theta[-1])
        self.simulator.retune(model, last_two)


def run_record(plant: Plant, record: Record, fit: Fit) -> tuple[Array, Array, Mask, SimulatedPredictor]:
    """The model over a whole record: ε (N,), ψ (N, p), rows that count (N,), and the predictor standing at its end.

    Behind each gap the model stands at the steady state of the input, and the rows until that is forgotten do not
    count; nor do the first rows of the record, whose dead time reaches back before it.
    """
    predictor = SimulatedPredictor(plant, fit, record.inputs[0])
    ends = (*record.starts[1:], len(record))
    settle = plant.settling_rows(fit.theta)
    pieces = []
    for start, end in zip(record.starts, ends, strict=True):
        if start > 0:
            predictor.restart(record.inputs[start])
        residual, psi, ok = predictor.run(record.inputs[start:end], record.output[start:end], record.ok[start:end])
        ok[: settle if start > 0 else plant.depth + 2] = False
        pieces.append((residual, psi, ok))
    residuals, psis, oks = zip(*pieces, strict=True)
    return np.concatenate(residuals), np.concatenate(psis), np.concatenate(oks), predictor
