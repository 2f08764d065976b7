"""An invented conveyor: a motor under a wandering load, moved by set-points, measured with noise and coarsely."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from rtid.plants.motor import Motor, RunningMotor

VOLTS = (6.0, 18.0)
HOLD_S = (0.3, 1.5)  # how long one set-point stays
LOAD_STEP = 0.0005  # N m a row, pulled back to zero within about ten seconds
LOAD_MEMORY = 0.999


@dataclass(frozen=True, slots=True)
class Ageing:
    """From `start_s` on, over `length_s`, the winding grows warmer and the bearings rougher, both linearly."""

    start_s: float
    length_s: float
    warmer_k: float = 55.0
    friction_factor: float = 1.9

    def share(self, time_s: float) -> float:
        """How much of the change has happened, 0 to 1."""
        return min(1.0, max(0.0, (time_s - self.start_s) / self.length_s))

    def motor(self, new: Motor, time_s: float) -> Motor:
        share = self.share(time_s)
        return new.aged(warmer_k=share * self.warmer_k, friction_factor=1.0 + share * (self.friction_factor - 1.0))


class Conveyor:
    """`row()` gives one sample after the other: (time in s, volts applied from then on, measured speed in rad/s)."""

    def __init__(
        self,
        *,
        seed: int,
        period_s: float = 0.01,
        ageing: Ageing | None = None,
        noise: float = 0.2,
        resolution: float = 0.1,
    ) -> None:
        self.new = Motor()
        self._rng = np.random.default_rng(seed)
        self._running = RunningMotor(self.new, period_s)
        self._period_s = period_s
        self._ageing = ageing
        self._noise = noise
        self._resolution = resolution
        self._row = self._next_move = 0
        self._volts = self._load = 0.0

    @property
    def motor(self) -> Motor:
        """The motor as it is now."""
        return self._running.motor

    def row(self) -> tuple[float, float, float]:
        time_s = self._row * self._period_s
        if self._row >= self._next_move:
            self._move()
        if self._ageing is not None and self._ageing.motor(self.new, time_s) != self.motor:
            self._running.become(self._ageing.motor(self.new, time_s))
        measured = self._running.speed + self._noise * self._rng.standard_normal()
        self._load = LOAD_MEMORY * self._load + LOAD_STEP * self._rng.standard_normal()
        self._running.advance(self._volts, self._load)
        self._row += 1
        return time_s, self._volts, round(measured / self._resolution) * self._resolution

    def _move(self) -> None:
        """The next set-point, to a tenth of a volt."""
        self._volts = round(float(self._rng.uniform(*VOLTS)), 1)
        self._next_move = self._row + round(self._rng.uniform(*HOLD_S) / self._period_s)
