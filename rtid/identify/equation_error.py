"""The structure `equation_error` (ARX): y(t) = -Σ a_i y(t-i) + Σ b_j u(t-d-j) + c + e(t), with a bank of dead times.

Ljung, System Identification, 2nd ed., sec. 4.2. Right when the disturbance enters before the plant's dynamics; a
noisy sensor biases it, which is why `output_error` is the default.
"""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from rtid.identify.least_squares import LeastSquaresStack
from rtid.identify.record import Record
from rtid.identify.structure import Fit
from rtid.kept import Kept

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

MIN_ROWS = 200
_ABSURD = 1e100  # its square still has a place among the numbers
_FAR = 1e6
START_ERROR = 0.2  # standard error of ln|gain| at which an estimate is worth publishing


class Regressors(Kept):
    """Makes the rows [-y(t-1)…, u(t-d-1)…, 1] of every dead time d, in pieces of any length."""

    KEPT = ("_inputs", "_output", "_ok")

    def __init__(self, order: int, delays: tuple[int, ...]) -> None:
        self._order = order
        self._delays = delays
        self._depth = delays[-1] + order
        self.p = 2 * order + 1
        self._inputs = np.zeros(self._depth)
        self._output = np.zeros(self._depth)
        self._ok = np.zeros(self._depth, dtype=np.bool_)

    def run(self, inputs: Array, output: Array, ok: Mask) -> tuple[Array, Mask]:
        """inputs, output, ok: (m,). Regressors (c, m, p) and which rows have their whole past (m,)."""
        m, depth = len(output), self._depth
        u = np.concatenate((self._inputs, np.where(np.abs(inputs) < _ABSURD, inputs, 0.0)))
        present = ok & (np.abs(output) < _ABSURD) & (np.abs(inputs) < _ABSURD)
        y = np.concatenate((self._output, np.where(present, output, 0.0)))
        known = np.concatenate((self._ok, present))
        rows = np.ones((len(self._delays), m, self.p))
        good = present.copy()
        for i in range(1, self._order + 1):
            rows[:, :, i - 1] = -y[depth - i : depth - i + m]
            good &= known[depth - i : depth - i + m]
            for c, d in enumerate(self._delays):
                rows[c, :, self._order + i - 1] = u[depth - d - i : depth - d - i + m]
        good &= known[:m]
        self._inputs, self._output, self._ok = u[m:], y[m:], known[m:]
        return rows, good

    def break_off(self) -> None:
        """What comes next does not follow on what came before."""
        self._ok[:] = False


class EquationError:
    """`structure.Structure` for ARX models of order 1 or 2."""

    def __init__(
        self, order: int, period: float, dead_time: tuple[float, float], *, least_noise: float = 0.0
    ) -> None:
        self.least_noise = least_noise  # deviation below which the output cannot be read
        self.order = order
        self.period = period
        least, most = round(dead_time[0] / period), round(dead_time[1] / period)
        self.delays = tuple(range(int(least), max(int(least), int(most)) + 1))
        lags = range(1, order + 1)
        self.names = (*(f"a{i}" for i in lags), *(f"b{i}" for i in lags), "constant")

    def first_fit(self, record: Record) -> Fit | None:
        if len(record) < MIN_ROWS:
            return None
        fit = self._fit(record)
        told = [np.isfinite(fit.covariance).all(), fit.rows >= MIN_ROWS // 2]
        return fit if all(told) and _log_gain_error(fit, self.order) < START_ERROR else None

    def refit(self, record: Record, fit: Fit, *, thorough: bool = False, moving: bool = False) -> Fit:
        """Least squares has one minimum, and the measured output carries the level: both choices change nothing."""
        return self._fit(record)

    def run(self, record: Record, fit: Fit) -> tuple[Array, Array, Mask, EquationPredictor]:
        predictor = EquationPredictor(self, fit)
        return *predictor.run_record(record), predictor

    def estimator(self, fit: Fit, record: Record, *, memory: float) -> BankEstimator:
        stack, regressors = self._stack(record)
        return BankEstimator(self, stack, regressors, fit=fit, memory=memory)

    def relative_gain(self, record: Record, fit: Fit) -> tuple[float, float] | None:
        """Its parameters do not part gain from dynamics."""
        return None

    def settling_rows(self, fit: Fit) -> int:
        slowest = self.slowest(fit)
        return fit.delay + math.ceil(5.0 * slowest / self.period)

    def slowest(self, fit: Fit) -> float:
        """Largest time constant, seconds: that of the slowest pole's envelope."""
        size = float(np.max(np.abs(_poles(fit.theta, self.order))))
        return -self.period / math.log(size) if 0.0 < size < 0.999999 else 1e6 * self.period

    def quantities(self, theta: Array, fit: Fit) -> dict[str, float]:
        n = self.order
        at_one = 1.0 + float(theta[:n].sum())
        values = {"gain": float(theta[n : 2 * n].sum()) / at_one if at_one else math.nan}
        values |= _dynamics(_poles(theta, n), self.period)
        offset = float(theta[-1]) / at_one if at_one else math.nan
        return values | {"dead_time": fit.delay * self.period, "offset": offset}

    def transfer(self, fit: Fit) -> list[tuple[Array, Array, int]]:
        n = self.order
        return [(np.concatenate(([0.0], fit.theta[n : 2 * n])), np.concatenate(([1.0], fit.theta[:n])), fit.delay)]

    def _fit(self, record: Record) -> Fit:
        stack, centre = self._stack(record)[0], record.inputs.mean(axis=0)
        return fit_of(stack, self.delays, centre, least_noise=self.least_noise)

    def _prior(self, record: Record) -> Array:
        """Prior deviation of every parameter, per unit of output: far beyond anything that a record can show."""
        output, drive = _size(record.output[np.isfinite(record.output)]), _size(record.inputs[:, 0])
        return _FAR * np.array([1.0 / output] * self.order + [1.0 / drive] * self.order + [1.0])

    def _stack(self, record: Record) -> tuple[LeastSquaresStack, Regressors]:
        regressors = Regressors(self.order, self.delays)
        stack = LeastSquaresStack(len(self.delays), self._prior(record))
        ends = (*record.starts[1:], len(record))
        for start, end in zip(record.starts, ends, strict=True):
            regressors.break_off()
            part = record.part(start, end)
            rows, good = regressors.run(part.inputs[:, 0], part.output, part.ok)
            stack.fold(rows[:, good], part.output[good])
        return stack, regressors


def fit_of(
    stack: LeastSquaresStack, delays: tuple[int, ...], centre: Array, *, least_noise: float = 0.0
) -> Fit:
    """The best candidate of a stack, with the covariance of least squares and the dead time's posterior deviation."""
    sums = stack.residual_sum()
    best = int(np.argmin(sums))
    freedom = max(1.0, stack.weight - stack.p)
    variance = max(float(sums[best]) / freedom, least_noise**2, 1e-24)
    evidence = np.exp(-0.5 * np.minimum((sums - sums[best]) / variance, 1400.0))
    spread = float(np.sqrt((evidence * (np.array(delays) - delays[best]) ** 2).sum() / evidence.sum() + 1.0 / 12.0))
    sigma = math.sqrt(variance)
    return Fit(
        theta=stack.solve()[best], covariance=variance * stack.inverse(best), sigma=sigma, noise=sigma,
        ar=np.zeros(0), rows=int(stack.weight), centre=centre, delay=delays[best],
        delay_error=spread if len(delays) > 1 else 0.0, noise_rows=stack.weight,
    )  # fmt: skip


class EquationPredictor(Kept):
    """`structure.Predictor` of an ARX model."""

    KEPT = ("_regressors",)

    def __init__(self, structure: EquationError, fit: Fit) -> None:
        self._theta = fit.theta
        self._regressors = Regressors(structure.order, (fit.delay,))

    def run(self, inputs: Array, output: Array, ok: Mask) -> tuple[Array, Array, Mask]:
        rows, good = self._regressors.run(inputs[:, 0], output, ok)
        return np.where(good, output, 0.0) - rows[0] @ self._theta * good, rows[0], good

    def run_record(self, record: Record) -> tuple[Array, Array, Mask]:
        pieces = []
        for start, end in zip(record.starts, (*record.starts[1:], len(record)), strict=True):
            self._regressors.break_off()
            part = record.part(start, end)
            pieces.append(self.run(part.inputs, part.output, part.ok))
        residuals, psis, oks = zip(*pieces, strict=True)
        return np.concatenate(residuals), np.concatenate(psis), np.concatenate(oks)

    def restart(self, inputs: Array) -> None:
        self._regressors.break_off()


class BankEstimator(Kept):
    """`structure.Estimator`: every dead time of the bank at once; learns only from blocks that bring information."""

    KEPT = ("_fit", "_stack", "_regressors", "_squares", "_quiet_rows", "invalid")

    def __init__(
        self, structure: EquationError, stack: LeastSquaresStack, regressors: Regressors, *, fit: Fit, memory: float
    ) -> None:
        self._structure = structure
        self._memory = memory
        self._regressors = regressors
        self._stack = stack
        self._fit = fit
        self._squares = np.array([_square(t[: stack.p, : stack.p]) for t in stack.triangle])  # Σλ^2k φφT
        self._quiet_rows = 0
        self.invalid = False

    @property
    def fit(self) -> Fit:
        return self._fit

    def step(self, inputs: Array, output: Array, ok: Mask) -> tuple[Array, Array, Mask]:
        """Learn from the next m rows; the prediction error before learning twice (it is white), rows that count."""
        rows, good = self._regressors.run(inputs[:, 0], output, ok)
        best = self._structure.delays.index(self._fit.delay)
        error = np.where(good, np.nan_to_num(output) - rows[best] @ self._fit.theta, 0.0)
        if good.any():
            self._learn(rows[:, good], output[good], best)
        return error, error, good

    def informed(self) -> Mask:
        return np.full(self._stack.p, self._quiet_rows == 0)

    def restart(self, inputs: Array) -> None:
        self._regressors.break_off()

    def _learn(self, rows: Array, output: Array, best: int) -> None:
        m = len(output)
        inverse = self._stack.inverse(best)
        power = np.einsum("ij,jk,ik->i", rows[best], inverse, rows[best])
        news = float((power / (1.0 + power)).sum())
        if news <= 2.0 * m / self._memory:
            self._quiet_rows += m
            return
        self._quiet_rows = 0
        factor = math.exp(-m / self._memory)
        self._stack.fold(rows, output, factor=factor)
        self._squares = factor**2 * self._squares + rows.transpose(0, 2, 1) @ rows
        self._renew()

    def _renew(self) -> None:
        least = self._structure.least_noise
        fit = fit_of(self._stack, self._structure.delays, self._fit.centre, least_noise=least)
        best = self._structure.delays.index(fit.delay)
        inverse = self._stack.inverse(best)
        covariance = fit.sigma**2 * inverse @ self._squares[best] @ inverse
        spread = np.diag(covariance)
        self.invalid = not (np.isfinite(fit.theta).all() and np.isfinite(covariance).all() and (spread >= 0.0).all())
        if not self.invalid:
            self._fit = replace(fit, covariance=covariance)


def _log_gain_error(fit: Fit, order: int) -> float:
    """Standard error of ln|B(1)/A(1)| by the delta method."""
    at_one, total = 1.0 + fit.theta[:order].sum(), fit.theta[order : 2 * order].sum()
    if at_one == 0.0 or total == 0.0:
        return math.inf
    slope = np.concatenate((np.full(order, -1.0 / at_one), np.full(order, 1.0 / total), [0.0]))
    return float(np.sqrt(slope @ fit.covariance @ slope))


def _size(values: Array) -> float:
    """Root mean square, 1 for nothing but zeros."""
    size = float(np.sqrt(np.mean(values**2))) if len(values) else 0.0
    return size if size > 0.0 else 1.0


def _square(triangle: Array) -> Array:
    return np.asarray(triangle.T @ triangle)


def _poles(theta: Array, order: int) -> NDArray[np.complex128]:
    if order == 1:
        return np.array([-theta[0]], dtype=np.complex128)
    half = -0.5 * complex(theta[0])
    root = np.sqrt(half * half - complex(theta[1]))
    return np.array([half + root, half - root])


def _dynamics(poles: NDArray[np.complex128], period: float) -> dict[str, float]:
    """Time constants, natural frequency, damping ratio from discrete poles (z = e^(sT)); NaN where there are none."""
    real = bool(np.all(np.abs(poles.imag) < 1e-12) and np.all((poles.real > 0.0) & (poles.real < 1.0)))
    constants = sorted((-period / math.log(p) for p in poles.real), reverse=True) if real else [math.nan] * len(poles)
    if len(poles) == 1:
        return {"time_constant_1": constants[0]}
    stable = bool(np.all((np.abs(poles) > 0.0) & (np.abs(poles) < 1.0)) and (real or abs(poles[0].imag) >= 1e-12))
    rates = np.log(poles) / period if stable else np.full(2, math.nan, dtype=np.complex128)
    frequency = float(np.sqrt(np.abs(rates[0] * rates[1])))
    damping = float(-0.5 * (rates[0] + rates[1]).real / frequency) if stable else math.nan
    return {"natural_frequency": frequency, "damping_ratio": damping,
            "time_constant_1": constants[0], "time_constant_2": constants[1]}  # fmt: skip
