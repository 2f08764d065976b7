"""What every model structure offers, so that a loop, its detectors and its snapshots need not know which it is."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np
from numpy.typing import NDArray

from rtid.identify.record import Record, blank_record

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Fit:
    """One estimate.

    theta: (p,) parameters; covariance: (p, p); sigma: deviation of the whitened residual; noise: deviation of the
    output's noise; ar: a_1 … a_q of the noise's A(q); rows: scored rows; centre: (n,) mean of the inputs;
    sign: of the gain; delay: whole rows of dead time where it is no parameter.
    """

    theta: Array
    covariance: Array
    sigma: float
    noise: float
    ar: Array
    rows: int
    centre: Array
    sign: float = 1.0
    delay: int = 0
    delay_error: float = 0.0  # standard error of `delay`, rows
    noise_rows: float = 0.0  # rows that `noise` rests on


class Predictor(Protocol):
    """A model with fixed parameters that runs beside the plant."""

    def run(self, inputs: Array, output: Array, ok: Mask) -> tuple[Array, Array, Mask]:
        """For the next m rows: residual ε (m,), sensitivities ψ (m, p) of the model output, rows that count (m,)."""
        ...

    def restart(self, inputs: Array) -> None:
        """After a gap: stand at the steady state of the present inputs, shape (n,)."""
        ...

    def to_state(self) -> dict[str, Any]: ...

    def load_state(self, state: dict[str, Any]) -> None: ...


class Estimator(Protocol):
    """A model whose parameters follow the plant, a block at a time."""

    invalid: bool  # it met numbers that it cannot go on from

    @property
    def fit(self) -> Fit: ...

    def step(self, inputs: Array, output: Array, ok: Mask) -> tuple[Array, Array, Mask]:
        """Learn from the next m rows: one-step and free-run error before learning, rows that count, each (m,)."""
        ...

    def informed(self) -> Mask:
        """Per parameter: whether the memory holds recent data about it, shape (p,)."""
        ...

    def restart(self, inputs: Array) -> None: ...

    def to_state(self) -> dict[str, Any]: ...

    def load_state(self, state: dict[str, Any]) -> None: ...


class Structure(Protocol):
    """One kind of model with its order and dead time range. `memory` is counted in rows."""

    names: tuple[str, ...]  # of the parameters
    period: float  # seconds

    def first_fit(self, record: Record) -> Fit | None:
        """From nothing; None while the record does not carry one."""
        ...

    def refit(self, record: Record, fit: Fit, *, thorough: bool = False, moving: bool = False) -> Fit:
        """From a known fit; `thorough` also tries the other minima, `moving` lets the level follow a slow change."""
        ...

    def run(self, record: Record, fit: Fit) -> tuple[Array, Array, Mask, Predictor]:
        """The model over a record: ε (N,), ψ (N, p), rows that count (N,), and the predictor that stands at its end."""
        ...

    def estimator(self, fit: Fit, record: Record, *, memory: float) -> Estimator: ...

    def relative_gain(self, record: Record, fit: Fit) -> tuple[float, float] | None:
        """Gain over that of `fit` and its standard error, dynamics as in `fit`; None where that is not told."""
        ...

    def quantities(self, theta: Array, fit: Fit) -> dict[str, float]:
        """Engineering quantities at θ in seconds and engineering units; NaN for one that does not exist there."""
        ...

    def slowest(self, fit: Fit) -> float:
        """Largest time constant, seconds."""
        ...

    def settling_rows(self, fit: Fit) -> int:
        """Rows of the dead time and five largest time constants."""
        ...

    def transfer(self, fit: Fit) -> list[tuple[Array, Array, int]]:
        """Per input: numerator and denominator in ascending powers of q^-1, and the whole rows of delay before them."""
        ...


def restored_estimator(structure: Structure, state: dict[str, Any], *, memory: float) -> Estimator:
    """An estimator that goes on from `Estimator.to_state()`."""
    fit: Fit = state["_fit"]
    estimator = structure.estimator(fit, blank_record(fit.centre), memory=memory)
    estimator.load_state(state)
    return estimator
