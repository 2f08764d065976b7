"""Rows on the grid: what the intake makes and a loop eats."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True)
class Rows:
    """Consecutive rows of one loop, at most one block.

    values: shape (m, n), one column per signal of `settings.Loop.signals`; NaN in the output column where the tick
    brought no reading. `first` is the tick number k of the first row; row i stands at data time
    `time_s + i * period_s`. `gap_s` is the length of a gap right before the first row (0: they follow on).
    `restart` is true when the device's clock began anew before the first row. `output_shift_s` is how much later
    than the tick the output was taken on average (averaging), to be added to the dead time found.
    """

    first: int
    time_s: float
    values: Array
    stamp: float  # label of the last row, seconds since 1970
    gap_s: float = 0.0
    restart: bool = False
    output_shift_s: float = 0.0
