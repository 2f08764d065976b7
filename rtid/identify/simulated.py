"""The plant in log-physical parameters, simulated beside the real one: over a record, or piece by piece."""

from __future__ import annotations

import math
from dataclasses import replace
from typing import Any

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
    """What stays the same for one loop: order, period, number of inputs and the range in which dead times lie.

    θ = [ln|K|, shape…, K_2, L_2, K_3, L_3, …, L, y0]: the first input's gain is a logarithm, those of later inputs
    are linear, for they may be nothing; all inputs share the shape.
    """

    def __init__(
        self, order: int, period: float, dead_time: tuple[float, float], *, inputs: int = 1, least_noise: float = 0.0
    ) -> None:
        self.order = order
        self.period = period
        self.dead_time = dead_time
        self.inputs = inputs
        self.least_noise = least_noise  # deviation below which the output cannot be read
        self.depth = math.ceil(dead_time[1] / period) + 1
        later = range(2, inputs + 1)
        pairs = [name for i in later for name in (f"gain_{i}", f"dead_time_{i}")]
        self.names = ("ln_gain", *SHAPE_NAMES[order], *pairs, "dead_time", "offset")
        p = len(self.names)
        self.later_gains = [1 + order + 2 * (i - 2) for i in later]
        self.dead_times = [p - 2, *(k + 1 for k in self.later_gains)]  # in the order of the inputs
        self.free = np.ones(p, dtype=np.bool_)
        self.free[self.dead_times] = dead_time[1] > dead_time[0]
        self._set_bounds(p)

    def _set_bounds(self, p: int) -> None:
        period, n = self.period, 1 + self.order
        self.low, self.high = np.full(p, -np.inf), np.full(p, np.inf)
        if self.order == 1:
            self.low[:n], self.high[:n] = (-60.0, math.log(0.1 * period)), (60.0, math.log(1e6 * period))
        else:
            self.low[:n] = (-60.0, math.log(1e-6 / period), math.log(0.01))
            self.high[:n] = (60.0, math.log(3.0 / period), math.log(30.0))
        self.low[self.dead_times], self.high[self.dead_times] = self.dead_time

    def box(self, theta: Array, *, logarithm: float, rows: float) -> tuple[Array, Array]:
        """Least and largest step of each parameter from θ: inside the bounds, and no longer than `logarithm` or `rows`.

        Levels and linear gains may go any way.
        """
        limit = np.full(len(self.names), np.inf)
        limit[: 1 + self.order] = logarithm
        limit[self.dead_times] = rows * self.period
        return np.maximum(-limit, self.low - theta), np.minimum(limit, self.high - theta)

    def prior(self, inputs: Array, output: Array) -> Array:
        """Deviation of each parameter before anything is known; inputs (N, n), output (N,) give the units."""
        spread = max(float(np.std(output)), 1e-9)
        deviation = np.full(len(self.names), 0.5)
        deviation[self.dead_times] = 3.0 * self.period
        for column, k in enumerate(self.later_gains, start=1):
            deviation[k] = spread / max(float(np.std(inputs[:, column])), 1e-9 * spread)
        deviation[-1] = spread
        return deviation

    def models(self, theta: Array, sign: float) -> list[HeldMap]:
        """One map per input; each has derivatives by ln|K| or K, the shape and its own dead time."""
        shape = theta[1 : 1 + self.order]
        first = held_map(self.order, np.array([theta[0], *shape, theta[-2]]), sign=sign, period=self.period)
        return [first, *(self._later(theta[k], shape, theta[k + 1]) for k in self.later_gains)]

    def _later(self, gain: float, shape: Array, dead_time: float) -> HeldMap:
        unit = held_map(self.order, np.array([0.0, *shape, dead_time]), sign=1.0, period=self.period)
        db = gain * unit.db
        db[:, 0] = unit.b
        return replace(unit, b=gain * unit.b, db=db)

    def columns(self, number: int) -> list[int]:
        """Where the derivatives of one input's map (0 is the first) stand in θ."""
        gain = 0 if number == 0 else self.later_gains[number - 1]
        return [gain, *range(1, 1 + self.order), self.dead_times[number]]

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
        """Longest dead time and five of the largest time constant."""
        longest = float(np.max(theta[self.dead_times]))
        return math.ceil((longest + 5.0 * self.time_constants(theta)[0]) / self.period)

    def quantities(self, theta: Array, fit: Fit) -> dict[str, float]:
        gains = [fit.sign * math.exp(theta[0]), *(float(theta[k]) for k in self.later_gains)]
        slow, fast = self.time_constants(theta)
        values = {"gain": gains[0]}
        if self.order == 1:
            values["time_constant_1"] = slow
        else:
            damping = math.exp(theta[2])
            real = damping >= 1.0
            values |= {"natural_frequency": math.exp(theta[1]), "damping_ratio": damping}
            values |= {"time_constant_1": slow if real else math.nan, "time_constant_2": fast if real else math.nan}
        values["dead_time"] = float(theta[-2])
        for number, k in enumerate(self.later_gains, start=2):
            values |= {f"gain_{number}": float(theta[k]), f"dead_time_{number}": float(theta[k + 1])}
        return values | {"offset": float(theta[-1] - np.dot(gains, fit.centre))}


class SimulatedPredictor(Kept):
    """`structure.Predictor` of an output-error model: one simulator per input."""

    KEPT = ("_centre", "_offset", "_last")

    def __init__(self, plant: Plant, fit: Fit, level: Array) -> None:
        self._plant = plant
        self._centre = fit.centre
        self._offset = float(fit.theta[-1])
        self.simulators = [
            Simulator(model, depth=plant.depth, level=float(level[i] - fit.centre[i]))
            for i, model in enumerate(plant.models(fit.theta, fit.sign))
        ]
        self._last = [np.zeros((2, 2 + plant.order))] * plant.inputs  # newest sensitivities, per input

    def run(self, inputs: Array, output: Array, ok: Mask) -> tuple[Array, Array, Mask]:
        residual = output - self._offset
        psi = np.zeros((len(output), len(self._plant.names)))
        psi[:, -1] = 1.0
        last = []
        for i, simulator in enumerate(self.simulators):
            x, sensitivity = simulator.run(inputs[:, i] - self._centre[i])
            residual = residual - x
            psi[:, self._plant.columns(i)] += sensitivity
            last.append(np.vstack((self._last[i], sensitivity))[-2:])
        self._last = last
        return residual, psi, ok & np.isfinite(output)

    def restart(self, inputs: Array) -> None:
        for simulator, value, centre in zip(self.simulators, inputs, self._centre, strict=True):
            simulator.restart(float(value - centre))

    def move(self, theta: Array, moved: Array, sign: float) -> None:
        """Go on with the parameters θ, which have moved by `moved`."""
        self._offset = float(theta[-1])
        for i, model in enumerate(self._plant.models(theta, sign)):
            before, last = (self._last[i] @ moved[self._plant.columns(i)]).tolist()
            self.simulators[i].retune(model, (last, before))

    def to_state(self) -> dict[str, Any]:
        return super().to_state() | {"simulators": [simulator.to_state() for simulator in self.simulators]}

    def load_state(self, state: dict[str, Any]) -> None:
        super().load_state(state)
        for simulator, part in zip(self.simulators, state["simulators"], strict=True):
            simulator.load_state(part)


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
