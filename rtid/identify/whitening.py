"""Autoregressive noise: its coefficients from autocovariances, and the filter that whitens."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from rtid.kept import Kept

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

MAX_ORDER = 4
LONG_RUN_LAGS = 24


def autocovariance(residual: Array, ok: Mask, lags: int = MAX_ORDER) -> Array:
    """Σε(t)ε(t-l) over pairs of good rows, l = 0 … lags, over the number of good rows; shape (lags+1,)."""
    clean = np.where(ok, residual, 0.0)
    count = max(1, int(ok.sum()))
    pairs = [clean[lag:] @ clean[: max(0, len(clean) - lag)] for lag in range(lags + 1)]
    return np.array(pairs) / count


def autoregression(covariance: Array, rows: float) -> Array:
    """Coefficients a_1 … a_q of A(q) = 1 + Σ a_l q^-l, q ≤ MAX_ORDER by BIC; always stable.

    Levinson-Durbin recursion on the autocovariances (Brockwell & Davis, Time Series, sec. 5.2).
    """
    best, coefficients = _bic(covariance[0], rows, 0), np.zeros(0)
    a, variance = np.zeros(0), float(covariance[0])
    for order in range(1, len(covariance)):
        if variance <= 1e-12 * covariance[0]:
            break
        reflection = -(covariance[order] + a @ covariance[order - 1 : 0 : -1]) / variance
        reflection = min(max(reflection, -0.9995), 0.9995)
        a = np.append(a + reflection * a[::-1], reflection)
        variance *= 1.0 - reflection**2
        score = _bic(variance, rows, order)
        if score < best:
            best, coefficients = score, a
    return coefficients


def long_run_ratio(covariance: Array) -> float:
    """Long-run variance over variance of a series that should be white: what its errors understate, 1 at the least.

    Bartlett's window over the lags given (Newey & West, Econometrica 55, 1987).
    """
    lags = len(covariance) - 1
    if covariance[0] <= 0.0:
        return 1.0
    weights = 1.0 - np.arange(1, lags + 1) / (lags + 1.0)
    return max(1.0, float(1.0 + 2.0 * (weights @ covariance[1:]) / covariance[0]))


class RunningAutocovariance(Kept):
    """Exponentially weighted autocovariances, lags 0 … n, of a series that comes in pieces of any length."""

    KEPT = ("covariance", "_tail")

    def __init__(self, covariance: Array) -> None:
        self.covariance = covariance
        self._tail = np.zeros(len(covariance) - 1)

    def break_off(self) -> None:
        """What comes next does not follow on what came before."""
        self._tail[:] = 0.0

    def add(self, values: Array, *, keep: float, rows: float) -> None:
        """`keep` weakens what is known; values: (m,), zero where a row does not count; `rows`: how many count."""
        tail = len(self._tail)
        series = np.concatenate((self._tail, values))
        m = len(values)
        fresh = np.array([values @ series[tail - lag : tail - lag + m] for lag in range(tail + 1)]) / rows
        self.covariance = keep * self.covariance + (1.0 - keep) * fresh
        self._tail = series[len(series) - tail :]


def _bic(variance: float, rows: float, order: int) -> float:
    return rows * math.log(max(variance, 1e-300)) + order * math.log(max(rows, 2.0))


class Whitener(Kept):
    """ε → A(q)ε and ψ → A(q)ψ, in pieces of any length; a row counts only if every row it touches was good."""

    KEPT = ("coefficients", "_residual", "_sensitivity", "_ok")

    def __init__(self, columns: int) -> None:
        self._residual = np.zeros(MAX_ORDER)
        self._sensitivity = np.zeros((MAX_ORDER, columns))
        self._ok = np.zeros(MAX_ORDER, dtype=np.bool_)
        self.coefficients = np.zeros(0)

    def break_off(self) -> None:
        """What comes next does not follow on what came before."""
        self._ok[:] = False

    def run(self, residual: Array, sensitivity: Array, ok: Mask) -> tuple[Array, Array, Mask]:
        """residual: (m,); sensitivity: (m, p); ok: (m,). Returns e, φ and which of the rows count."""
        m = len(residual)
        long_residual = np.concatenate((self._residual, np.where(ok, residual, 0.0)))
        long_sensitivity = np.concatenate((self._sensitivity, sensitivity))
        long_ok = np.concatenate((self._ok, ok))
        e, phi, good = long_residual[MAX_ORDER:].copy(), sensitivity.copy(), ok.copy()
        for lag, a in enumerate(self.coefficients, start=1):
            part = slice(MAX_ORDER - lag, MAX_ORDER - lag + m)
            e += a * long_residual[part]
            phi += a * long_sensitivity[part]
            good &= long_ok[part]
        self._residual, self._sensitivity = long_residual[-MAX_ORDER:], long_sensitivity[-MAX_ORDER:]
        self._ok = long_ok[-MAX_ORDER:]
        return e, phi, good
