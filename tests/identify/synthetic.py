"""Records of known plants for the tests of the mathematics: made by scipy, never by the code under test."""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray
from scipy.linalg import expm
from scipy.signal import fftconvolve, lfilter, tf2ss

from rtid.identify.record import Record
from rtid.identify.structure import Fit

Array = NDArray[np.float64]


def lag(order: int, gain: float, shape: Sequence[float]) -> tuple[list[float], list[float]]:
    """Numerator and denominator in s of gain/(τs+1), shape (τ,), or gain/((s/ω)²+2ζs/ω+1), shape (ω, ζ)."""
    if order == 1:
        return [gain], [shape[0], 1.0]
    w, z = shape
    return [gain], [1.0 / w**2, 2.0 * z / w, 1.0]


def step_response(numerator: Sequence[float], denominator: Sequence[float], first: float, n: int) -> Array:
    """Exact unit step response at the times first, first+1, …, first+n-1 (all > 0), by the matrix exponential."""
    a, b, c, d = tf2ss(numerator, denominator)
    size = len(a)
    augmented = np.zeros((size + 1, size + 1))
    augmented[:size, :size], augmented[:size, size:] = a, b
    state, advance = expm(augmented * first)[:size, size], expm(augmented)
    out = np.empty(n)
    for i in range(n):
        out[i] = c[0] @ state + d[0, 0]
        state = advance[:size, :size] @ state + advance[:size, size]
    return out


@lru_cache(maxsize=32)
def _pulse(numerator: tuple[float, ...], denominator: tuple[float, ...], dead_time: float, n: int) -> Array:
    """Response at the ticks to an input of 1 that is held for the first period; time in periods."""
    whole = int(np.floor(dead_time + 1e-9))
    step = step_response(numerator, denominator, 1.0 - max(0.0, dead_time - whole), n)
    return np.concatenate((np.zeros(whole + 1), np.diff(step, prepend=0.0)))[:n]


def held_response(
    numerator: Sequence[float], denominator: Sequence[float], dead_time: float, inputs: Array, *, period: float = 1.0
) -> Array:
    """Output at the ticks of a plant at rest whose input is held between ticks; any dead time in seconds.

    Superposition of the plant's step response s: the input u(k) adds u(k)·[s(t - L) - s(t - h - L)].
    """
    above, below = (_in_periods(polynomial, period) for polynomial in (numerator, denominator))
    n = len(inputs)
    return np.asarray(fftconvolve(inputs, _pulse(above, below, dead_time / period, n))[:n])


def _in_periods(polynomial: Sequence[float], period: float) -> tuple[float, ...]:
    """A polynomial in s, highest power first, with time counted in periods."""
    powers = range(len(polynomial) - 1, -1, -1)
    return tuple(c / period**i for c, i in zip(polynomial, powers, strict=True))


def switching(rng: np.random.Generator, rows: int, hold: int) -> Array:
    """±1, drawn anew every `hold` rows."""
    return np.repeat(rng.choice([-1.0, 1.0], rows // hold + 1), hold)[:rows]


def coloured(rng: np.random.Generator, rows: int, pole: float = 0.0) -> Array:
    """Noise of unit deviation: white, or first-order autoregressive with `pole`."""
    drawn = rng.standard_normal(rows + 300)
    return np.asarray(np.sqrt(1.0 - pole**2) * lfilter([1.0], [1.0, -pole], drawn)[300:])


def whole_record(inputs: Array, output: Array) -> Record:
    return Record(inputs[:, None], output, np.ones(len(output), dtype=np.bool_), (0,))


def guess(theta: Sequence[float], *, sign: float = 1.0, centre: float = 0.0) -> Fit:
    """A fit with these parameters and nothing known about them."""
    p = len(theta)
    return Fit(
        theta=np.array(theta, dtype=np.float64), covariance=np.eye(p), sigma=1.0, noise=1.0, ar=np.zeros(0), rows=0,
        centre=np.array([centre]), sign=sign,
    )  # fmt: skip
