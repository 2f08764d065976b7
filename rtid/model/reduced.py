"""A first-order-plus-dead-time form of any stable model, as tuning rules want it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from rtid.identify.recursion import all_pole

Array = NDArray[np.float64]

LARGEST_DEVIATION = 0.15  # of the final value: beyond, no first-order form describes the response
_ROWS = 20_000
_SLOWEST_POLE = 0.9997  # settles within those rows


@dataclass(frozen=True, slots=True)
class Reduced:
    gain: float
    time_constant_s: float
    dead_time_s: float


def reduced(numerator: Array, denominator: Array, *, delay: float, period: float) -> Reduced | None:
    """Fit K·e^(-Ls)/(τs+1) to the step response with the gain held. `delay`: seconds before the response.

    Starts from the two-point method (28.3 % and 63.2 %). None where the response has no end within 20 000 rows or the
    largest deviation is above 0.15 of it.
    """
    if np.max(np.abs(np.roots(denominator)), initial=0.0) > _SLOWEST_POLE or numerator.sum() == 0.0:
        return None
    response = unit_step(numerator, denominator)
    gain = float(numerator.sum() / denominator.sum())
    shape = response / gain
    settled = np.flatnonzero(np.abs(shape - 1.0) > 0.002)
    if not np.isfinite(shape).all() or (len(settled) and settled[-1] >= _ROWS - 2):
        return None
    last = int(settled[-1]) + 2 if len(settled) else 2
    times: Array = np.arange(last, dtype=np.float64) * period
    shape = shape[:last]
    tau, lag = _least_squares(times, shape, _two_point(times, shape, period))
    if float(np.abs(shape - _first_order(times, tau, lag)).max()) > LARGEST_DEVIATION:
        return None
    return Reduced(gain, tau, lag + delay)


def unit_step(numerator: Array, denominator: Array) -> Array:
    """Response of the discrete model to a unit step at row 0, without its delay."""
    forcing = np.cumsum(np.concatenate((numerator, np.zeros(_ROWS - len(numerator)))))
    poles = np.concatenate((denominator[1:], np.zeros(2)))[:2]
    return all_pole(forcing, poles, (0.0, 0.0))[0]


def _first_order(times: Array, tau: float, lag: float) -> Array:
    return np.asarray(-np.expm1(-np.maximum(times - lag, 0.0) / tau))


def _two_point(times: Array, shape: Array, period: float) -> tuple[float, float]:
    reached = [float(np.interp(level, np.maximum.accumulate(shape), times)) for level in (0.283, 0.632)]
    tau = max(1.5 * (reached[1] - reached[0]), 0.1 * period)
    return tau, max(reached[1] - tau, 0.0)


def _least_squares(times: Array, shape: Array, start: tuple[float, float]) -> tuple[float, float]:
    """Pattern search on (ln τ, L): the loss is smooth but for kinks at the rows."""

    def loss(t: float, d: float) -> float:
        return float(((shape - _first_order(times, t, d)) ** 2).sum())

    tau, lag = start
    now, step = loss(tau, lag), 0.25
    while step > 1e-6:
        around = [(tau * np.exp(s * step), max(0.0, lag + d * step * tau)) for s in (-1, 0, 1) for d in (-1, 0, 1)]
        losses = [loss(t, d) for t, d in around]
        winner = int(np.argmin(losses))
        if losses[winner] < now:
            now, (tau, lag) = losses[winner], around[winner]
        else:
            step *= 0.5
    return float(tau), float(lag)
