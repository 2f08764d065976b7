"""The simulated model of one loop, run in pieces of any length, with the sensitivities of its output."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rtid.identify.held import HeldMap
from rtid.identify.recursion import State, all_pole
from rtid.kept import Kept

Array = NDArray[np.float64]


class Simulator(Kept):
    """x = B/F·u, fed with the input alone and never with the measured output.

    `depth` is the longest dead time in rows that `model` will ever have while this simulator lives.
    """

    KEPT = ("_inputs", "_filtered", "_x", "_x_filtered")

    def __init__(self, model: HeldMap, *, depth: int, level: float) -> None:
        self._depth = depth + 3
        self.model = model
        self.restart(level)

    def restart(self, level: float) -> None:
        """Stand at the steady state of the constant input `level`."""
        held = level / self.model.steady
        steady = float(self.model.b.sum()) * held
        self._inputs = np.full(self._depth, level)
        self._filtered = np.full(self._depth, held)
        self._x: State = (steady, steady)
        self._x_filtered: State = (steady / self.model.steady,) * 2

    def run(self, inputs: Array) -> tuple[Array, Array]:
        """Output x, shape (m,), and ∂x/∂parameters, shape (m, p), for the next m inputs."""
        model, m = self.model, len(inputs)
        past = np.concatenate((self._inputs, inputs))
        held_state = (float(self._filtered[-1]), float(self._filtered[-2]))
        filtered = np.concatenate((self._filtered, all_pole(inputs, model.f, held_state)[0]))
        lags = [self._depth - model.d - j for j in (1, 2, 3)]
        drive = model.b[0] * past[lags[0] : lags[0] + m]
        drive += model.b[1] * past[lags[1] : lags[1] + m]
        drive += model.b[2] * past[lags[2] : lags[2] + m]
        x, self._x = all_pole(drive, model.f, self._x)
        basis = np.empty((m, 5))
        before = self._x_filtered
        x_filtered, self._x_filtered = all_pole(x, model.f, before)
        basis[:, 0] = _delayed(x_filtered, before, 1)
        basis[:, 1] = _delayed(x_filtered, before, 2)
        for j in range(3):
            basis[:, 2 + j] = filtered[lags[j] : lags[j] + m]
        self._inputs, self._filtered = past[m:], filtered[m:]
        return x, basis @ np.concatenate((-model.df, model.db))

    def retune(self, model: HeldMap, shift: tuple[float, float]) -> None:
        """Go on with other parameters; `shift` is what they add to the last and the last but one output."""
        self.model = model
        self._x = (self._x[0] + shift[0], self._x[1] + shift[1])


def _delayed(values: Array, before: State, lag: int) -> Array:
    return np.concatenate((np.array(before[:lag][::-1]), values))[: len(values)]
