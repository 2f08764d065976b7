"""The exact discrete map of a continuous plant under a held input, with fractional dead time, and its sensitivities.

A plant K·e^(-Ls)/(τs+1) (order 1) or K·e^(-Ls)/((s/ω)² + 2ζs/ω + 1) (order 2) whose input is constant between
ticks obeys, exactly at the ticks,

    x(t) = -f1 x(t-1) - f2 x(t-2) + b1 u(t-d-1) + b2 u(t-d-2) + b3 u(t-d-3)

(Åström & Wittenmark, Computer-Controlled Systems, ch. 2: zero-order-hold sampling with a fractional delay.)
Parameters are ln|K|, then ln τ or (ln ω, ln ζ), then L in seconds: they cannot leave the stable region.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

SHAPE_NAMES: dict[int, tuple[str, ...]] = {1: ("ln_time_constant",), 2: ("ln_natural_frequency", "ln_damping_ratio")}
_NEAR_CRITICAL = 1e-8


@dataclass(frozen=True, slots=True)
class HeldMap:
    """Coefficients at one parameter vector (p plant parameters) and their derivatives.

    f: (2,) denominator after the leading 1; b: (3,) numerator on u(t-d-1..3); d: whole rows of dead time;
    df: (2, p), db: (3, p).
    """

    f: Array
    b: Array
    d: int
    df: Array
    db: Array

    @property
    def steady(self) -> float:
        """Sum of the denominator: F(1)."""
        return 1.0 + float(self.f[0]) + float(self.f[1])


@dataclass(frozen=True, slots=True)
class _Decay:
    """E(t), the part of the unit step response still missing at t, its time derivative and its shape derivatives."""

    value: float
    slope: float
    shape: tuple[float, ...]


def held_map(order: int, plant: Array, *, sign: float, period: float) -> HeldMap:
    """Coefficients and sensitivities at `plant` = [ln|K|, shape…, L]; `sign` is the gain's, `period` in seconds."""
    gain = sign * math.exp(plant[0])
    dead_time = float(plant[-1])
    shape = tuple(math.exp(v) for v in plant[1:-1])
    whole = math.floor(dead_time / period + 1e-9)
    fraction = max(0.0, dead_time - whole * period)
    f, df_shape = _denominator(order, shape, period)
    ahead, back = _decay(order, shape, period - fraction), _decay(order, shape, -fraction)
    unit = _unit_numerator(f, ahead.value, back.value)
    p = len(plant)
    df, db = np.zeros((2, p)), np.zeros((3, p))
    db[:, 0] = unit
    for i in range(len(shape)):
        d1, d2 = df_shape[i]
        df[:, 1 + i] = (d1, d2)
        db[:, 1 + i] = (
            -ahead.shape[i],
            d1 + ahead.shape[i] + d2 * back.value + f[1] * back.shape[i],
            d2 * (1.0 - back.value) - f[1] * back.shape[i],
        )
    db[:, -1] = (ahead.slope, -(ahead.slope + f[1] * back.slope), f[1] * back.slope)
    return HeldMap(f=np.array(f), b=gain * np.array(unit), d=whole, df=df, db=gain * db)


def _unit_numerator(f: tuple[float, float], ahead: float, back: float) -> tuple[float, float, float]:
    return 1.0 - ahead, f[0] + ahead + f[1] * back, f[1] * (1.0 - back)


def _denominator(
    order: int, shape: tuple[float, ...], t: float
) -> tuple[tuple[float, float], tuple[tuple[float, float], ...]]:
    """(f1, f2) and, per shape parameter (a logarithm), their derivatives."""
    if order == 1:
        pole = math.exp(-t / shape[0])
        return (-pole, 0.0), ((-pole * t / shape[0], 0.0),)
    w, z = shape
    a = z * w
    c, s = _damped_cosine_sine(w, z, t)
    r2 = w * w - a * a
    f2 = math.exp(-2.0 * a * t)
    by_w = (2.0 * t * (a * c + r2 * s), -2.0 * a * t * f2)
    by_z = (2.0 * a * t * (c - a * s), -2.0 * a * t * f2)
    return (-2.0 * c, f2), (by_w, by_z)


def _decay(order: int, shape: tuple[float, ...], t: float) -> _Decay:
    if order == 1:
        tau = shape[0]
        e = math.exp(-t / tau)
        return _Decay(e, -e / tau, (e * t / tau,))
    w, z = shape
    a = z * w
    c, s = _damped_cosine_sine(w, z, t)
    slope = -w * w * s
    r2 = w * w - a * a
    bend = (t * c - s) / r2 if abs(r2) * t * t > 1.0 else _bend(r2, t) * math.exp(-a * t)
    return _Decay(c + a * s, slope, (t * slope, -a * w * w * bend))


def _damped_cosine_sine(w: float, z: float, t: float) -> tuple[float, float]:
    """e^(-at)·cos(rt) and e^(-at)·sin(rt)/r, with cosh and sinh where overdamped, without overflow."""
    a = z * w
    r2 = w * w - a * a
    e = math.exp(-a * t)
    if abs(r2) * t * t < _NEAR_CRITICAL:
        return e * (1.0 - r2 * t * t / 2.0), e * t * (1.0 - r2 * t * t / 6.0)
    r = math.sqrt(abs(r2))
    if r2 > 0.0:
        return e * math.cos(r * t), e * math.sin(r * t) / r
    if r * abs(t) < 1.0:
        return e * math.cosh(r * t), e * math.sinh(r * t) / r
    slow, fast = math.exp(-(a - r) * t), math.exp(-(a + r) * t)
    return 0.5 * (slow + fast), 0.5 * (slow - fast) / r


def _bend(r2: float, t: float) -> float:
    """(t cos(rt) - sin(rt)/r)/r² by its power series, for |r²|t² below 1."""
    term, total = -(t**3) / 3.0, 0.0
    for k in range(1, 10):
        total += term
        term *= -r2 * t * t * (k + 1.0) / (k * (2.0 * k + 2.0) * (2.0 * k + 3.0))
    return total
