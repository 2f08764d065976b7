"""A direct-current motor that drives a conveyor: voltage in, speed out, exact between samples.

L di/dt = v - R i - Ke w and J dw/dt = Kt i - b w - load. From voltage to speed the gain is Kt / (R b + Kt Ke).
The winding is copper: its resistance grows by 0.00393 of its value at 20 degC per kelvin (IEC 60028).
"""

from __future__ import annotations

import cmath
import math
from dataclasses import dataclass, replace

import numpy as np

from rtid.plants.discrete import Array, held

COPPER_PER_KELVIN = 0.00393


@dataclass(frozen=True, slots=True)
class Motor:
    """Physical constants in SI units; `resistance` is that of the present winding temperature."""

    resistance: float = 2.0  # ohm
    inductance: float = 0.1  # H
    back_emf: float = 0.4  # V s/rad
    torque: float = 0.4  # N m/A
    inertia: float = 0.05  # kg m²
    friction: float = 0.02  # N m s/rad

    def aged(self, *, warmer_k: float = 0.0, friction_factor: float = 1.0) -> Motor:
        """The same motor with a warmer winding and rougher bearings."""
        return replace(
            self,
            resistance=self.resistance * (1.0 + COPPER_PER_KELVIN * warmer_k),
            friction=self.friction * friction_factor,
        )

    @property
    def gain(self) -> float:
        """Speed per volt at rest, rad/s/V."""
        return self.torque / (self.resistance * self.friction + self.torque * self.back_emf)

    @property
    def poles(self) -> tuple[complex, complex]:
        """Roots of L J s² + (R J + L b) s + R b + Kt Ke, in 1/s, slowest first."""
        a = self.inductance * self.inertia
        b = self.resistance * self.inertia + self.inductance * self.friction
        c = self.resistance * self.friction + self.torque * self.back_emf
        root = cmath.sqrt(b * b - 4.0 * a * c)
        return (-b + root) / (2.0 * a), (-b - root) / (2.0 * a)

    @property
    def natural_frequency(self) -> float:
        """Undamped, rad/s."""
        first, second = self.poles
        return math.sqrt(abs(first * second))

    @property
    def damping_ratio(self) -> float:
        first, second = self.poles
        return -(first + second).real / (2.0 * self.natural_frequency)

    @property
    def time_constants_s(self) -> tuple[float, float] | None:
        """Largest first; None where the motor oscillates."""
        first, second = self.poles
        return None if first.imag else (-1.0 / first.real, -1.0 / second.real)

    def held(self, period_s: float) -> tuple[Array, Array]:
        """Discrete (Ad, Bd) of the state (current, speed) with held inputs (voltage, load torque)."""
        a = np.array(
            [
                [-self.resistance / self.inductance, -self.back_emf / self.inductance],
                [self.torque / self.inertia, -self.friction / self.inertia],
            ]
        )
        b = np.array([[1.0 / self.inductance, 0.0], [0.0, -1.0 / self.inertia]])
        return held(a, b, period_s)


class RunningMotor:
    """A motor in motion: `advance` moves it by one period and says its speed at the end of it."""

    def __init__(self, motor: Motor, period_s: float) -> None:
        self._period_s = period_s
        self._state = np.zeros(2)
        self.become(motor)

    def become(self, motor: Motor) -> None:
        """Change the constants and keep current and speed."""
        self.motor = motor
        self._ad, self._bd = motor.held(self._period_s)

    @property
    def speed(self) -> float:
        """rad/s."""
        return float(self._state[1])

    def advance(self, volts: float, load: float = 0.0) -> float:
        self._state = self._ad @ self._state + self._bd @ np.array([volts, load])
        return self.speed
