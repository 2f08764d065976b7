"""How well the estimate predicts data that it had not yet seen."""

from __future__ import annotations

from collections import deque
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rtid.identify.whitening import autocovariance, autoregression
from rtid.kept import Kept
from rtid.model.chi_square import upper_tail

Array = NDArray[np.float64]

LAGS = 20
_LEAST_ROWS = 5 * LAGS


@dataclass(frozen=True, slots=True)
class Validation:
    """Errors in percent of the output's deviation (0 is perfect); p-values of the two residual tests."""

    one_step_error_pct: float | None = None
    free_run_error_pct: float | None = None
    whiteness_p: float | None = None
    input_residual_p: float | None = None


class RecentRows(Kept):
    """The newest rows with the errors that the estimate made before it learnt from them."""

    def __init__(self, rows: int, block_rows: int) -> None:
        self._blocks: deque[tuple[Array, Array, Array, Array]] = deque(maxlen=max(1, rows // block_rows))

    def add(self, *, one_step: Array, free_run: Array, output: Array, drive: Array) -> None:
        """One block, each (m,)."""
        self._blocks.append((one_step, free_run, output, drive))

    def to_state(self) -> dict[str, Any]:
        return {"blocks": list(self._blocks)}

    def load_state(self, state: dict[str, Any]) -> None:
        self._blocks.clear()
        self._blocks.extend(state["blocks"])

    def validate(self) -> Validation:
        if sum(len(block[0]) for block in self._blocks) < _LEAST_ROWS:
            return Validation()
        one_step, free_run, output, drive = (np.concatenate(parts) for parts in zip(*self._blocks, strict=True))
        return Validation(
            one_step_error_pct=error_pct(one_step, output),
            free_run_error_pct=error_pct(free_run, output),
            whiteness_p=ljung_box(one_step, LAGS),
            input_residual_p=input_residual(one_step, drive, LAGS),
        )


def error_pct(error: Array, output: Array) -> float | None:
    """100·‖y − ŷ‖/‖y − mean y‖; None for an output that did not move."""
    size = float(np.linalg.norm(output - output.mean()))
    return 100.0 * float(np.linalg.norm(error)) / size if size > 0.0 else None


def ljung_box(residual: Array, lags: int) -> float:
    """p-value of the portmanteau test on `lags` autocorrelations (Ljung & Box, Biometrika 65, 1978)."""
    n = len(residual)
    centred = residual - residual.mean()
    power = float(centred @ centred)
    if power == 0.0:
        return 1.0
    rho = np.array([centred[k:] @ centred[:-k] for k in range(1, lags + 1)]) / power
    statistic = n * (n + 2.0) * float((rho**2 / (n - np.arange(1, lags + 1))).sum())
    return upper_tail(statistic, lags)


def input_residual(residual: Array, drive: Array, lags: int) -> float | None:
    """p-value for no correlation between the residual and the prewhitened input at lags 0 … `lags`.

    Prewhitening after Box & Jenkins, Time Series Analysis, ch. 11. None for an input that did not move.
    """
    centred = drive - drive.mean()
    if float(np.abs(centred).max()) == 0.0:
        return None
    a = autoregression(autocovariance(centred, np.ones(len(centred), dtype=np.bool_)), float(len(centred)))
    white = np.convolve(centred, np.concatenate(([1.0], a)))[: len(centred)]
    left = residual - residual.mean()
    scale = float(np.linalg.norm(white) * np.linalg.norm(left))
    if scale == 0.0:
        return None
    r = np.array([left[k:] @ white[: len(white) - k] for k in range(lags + 1)]) / scale
    return upper_tail(len(left) * float((r**2).sum()), lags + 1)
