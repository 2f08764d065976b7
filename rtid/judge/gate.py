"""The gate `active_when`: rows outside it are neither learnt from nor judged."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from rtid.kept import Kept
from rtid.settings import Condition, Gate

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]


class GateKeeper(Kept):
    """Remembers how long the conditions have held. No gate: always active."""

    KEPT = ("_held_rows",)

    def __init__(self, gate: Gate | None, columns: tuple[str, ...], period: float) -> None:
        self._conditions = [(columns.index(c.signal), c) for c in gate.conditions] if gate else []
        self._settle_rows = math.ceil(gate.settle_s / period) if gate else 0
        self._held_rows = 0

    def active(self, values: Array) -> Mask:
        """values: (m, n) rows. Which of them, (m,), are active."""
        if not self._conditions:
            return np.ones(len(values), dtype=np.bool_)
        open_now = np.all([_met(values[:, i], condition) for i, condition in self._conditions], axis=0)
        out = np.zeros(len(values), dtype=np.bool_)
        for row, is_open in enumerate(open_now.tolist()):
            self._held_rows = self._held_rows + 1 if is_open else 0
            out[row] = is_open and self._held_rows > self._settle_rows
        return out


def _met(column: Array, condition: Condition) -> Mask:
    if condition.above is not None:
        return np.asarray(column > condition.above)
    if condition.below is not None:
        return np.asarray(column < condition.below)
    return np.asarray(column == condition.equals)
