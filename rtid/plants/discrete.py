"""Exact sampling of a linear system dx/dt = A x + B u whose input is held between samples."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

TAYLOR_TERMS = 18  # with a norm of at most 0.5 the first term left out is below 1e-21 of the sum


def matrix_exponential(matrix: Array) -> Array:
    """exp(matrix) of a small square matrix: Taylor series after halving, then squaring (Moler & Van Loan 2003)."""
    norm = float(np.abs(matrix).sum(axis=1).max())
    halvings = max(0, math.ceil(math.log2(norm / 0.5))) if norm > 0.0 else 0
    scaled = matrix / 2.0**halvings
    total = term = np.eye(len(matrix))
    for k in range(1, TAYLOR_TERMS + 1):
        term = term @ scaled / k
        total = total + term
    for _ in range(halvings):
        total = total @ total
    return total


def held(a: Array, b: Array, seconds: float) -> tuple[Array, Array]:
    """(Ad, Bd) of x(t + seconds) = Ad x(t) + Bd u with u held; a (n, n), b (n, inputs) (Van Loan 1978)."""
    n, inputs = b.shape
    joined = np.zeros((n + inputs, n + inputs))
    joined[:n, :n], joined[:n, n:] = a * seconds, b * seconds
    exponential = matrix_exponential(joined)
    return exponential[:n, :n], exponential[:n, n:]


@dataclass(frozen=True, slots=True)
class Step:
    """One period of a plant with dead time: x' = ad x + earlier u(k-d-1) + later u(k-d)."""

    ad: Array
    earlier: Array
    later: Array
    delay: int


def delayed(a: Array, b: Array, *, period_s: float, dead_time_s: float) -> Step:
    """The step over one period when the held input arrives `dead_time_s` late, its fraction of a period included."""
    delay = math.floor(dead_time_s / period_s + 1e-9)
    fraction = max(0.0, dead_time_s - delay * period_s)
    ad, _ = held(a, b, period_s)
    rest, later = held(a, b, period_s - fraction)
    _, first = held(a, b, fraction)
    return Step(ad, rest @ first, later, delay)
