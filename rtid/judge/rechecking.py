"""Now and then the recent rows are fitted anew, in case the recursion has talked itself into something.

A recursion learns by slopes taken at its own estimate; where data say little in one direction, slopes taken at a wrong
place pass for knowledge (Huang, Mourikis & Roumeliotis, Int. J. Robotics Research 29, 2010). A fit of the rows
themselves has no past.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from rtid.identify.record import RecordKeeper
from rtid.identify.structure import Estimator, Fit, Structure
from rtid.judge.baseline import ill_known
from rtid.kept import Kept

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_MOST_ROWS = 20_000
_LONGEST = 8.0  # memories between two looks
_APART = 4.0  # standard errors of the fit


class Rechecking(Kept):
    """Keeps the rows of one memory, or of 20 time constants, and replaces an estimator that contradicts them.

    `memory`: in rows; `settling`: rows of the dead time and five time constants.
    """

    KEPT = ("_keeper", "_rows", "_next")

    def __init__(self, structure: Structure, *, memory: float, settling: int) -> None:
        self._structure = structure
        self._memory = memory
        rows = int(min(max(memory, 4.0 * settling, 200.0), _MOST_ROWS))
        self._keeper = RecordKeeper(rows)
        self._rows = 0
        self._next = float(rows)

    def step(self, estimator: Estimator, inputs: Array, output: Array, ok: Mask, *, new_stretch: bool) -> Estimator:
        """Take in the next m rows; `estimator`, or a fresh one that agrees with them."""
        self._keeper.append(inputs, output, ok, new_stretch=new_stretch)
        self._rows += len(output)
        if self._rows < self._next:
            return estimator
        self._next = self._rows + min(max(self._memory, 0.5 * self._rows), _LONGEST * self._memory)
        record = self._keeper.record()
        fit = self._structure.refit(record, estimator.fit)
        if ill_known(self._structure, fit) is not None or not _apart(estimator.fit, fit):
            return estimator
        return self._structure.estimator(fit, record, memory=self._memory)


def _apart(now: Fit, fit: Fit) -> bool:
    """Whether two estimates differ in any parameter but the level by more than the second allows."""
    error = np.sqrt(np.maximum(np.diag(fit.covariance), 0.0))[:-1]
    moved = np.abs(now.theta - fit.theta)[:-1]
    return now.sign != fit.sign or bool(np.any(moved > _APART * error))
