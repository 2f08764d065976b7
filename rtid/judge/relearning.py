"""After a flagged change: fit the rows since then anew, so that the estimate does not creep from old plant to new."""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from rtid.identify.record import RecordKeeper
from rtid.identify.structure import Estimator, Fit, Structure
from rtid.judge.baseline import ill_known
from rtid.kept import Kept

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_GROWTH = 1.5  # rows between two fits
_TRANSIENT = 0.6  # of dead time and five time constants: what the change itself stirs up has died down
_MOST_ROWS = 20_000
_POOR = 1.3  # times the baseline's deviation: a warm fit may have missed


class Relearning(Kept):
    """Collects the rows since a flag and hands out an estimator that knows nothing else, at first perhaps little.

    `found`: the rows have carried a fit that knows the plant. `gain_alone`: where they never did, the gain over the
    baseline's and its standard error with all else as at the baseline: so a lost gain is seen.
    Rows older than the estimator's `memory` (rows) are left out, so a plant that goes on changing is followed.
    """

    KEPT = ("_keeper", "_rows", "_next", "found", "gain_alone")

    def __init__(self, structure: Structure, before: Fit, *, memory: float) -> None:
        self._structure = structure
        self._before = before
        self._memory = memory
        settling = structure.settling_rows(before)
        self._wait = math.ceil(_TRANSIENT * settling)
        limit = min(_MOST_ROWS, max(math.ceil(memory), 2 * settling))
        self._limit = limit - 16  # rows, but for an open block
        self._keeper = RecordKeeper(limit)
        self._rows = 0
        self._next = 2.0 * self._wait
        self.found = False
        self.gain_alone: tuple[float, float] | None = None

    @property
    def told(self) -> bool:
        return self.found or self.gain_alone is not None

    def step(self, estimator: Estimator, inputs: Array, output: Array, ok: Mask, *, new_stretch: bool) -> Estimator:
        """Take in the next m rows; `estimator`, or a fresh one that knows the plant since the flag."""
        self._rows += len(output)
        if self._rows > self._wait:
            self._keeper.append(inputs, output, ok, new_stretch=new_stretch)
        if self._rows < self._next:
            return estimator
        self._next = _GROWTH * self._rows
        return self._fit(estimator)

    def _fit(self, estimator: Estimator) -> Estimator:
        record = self._keeper.record()
        fits = [self._structure.refit(record, start, moving=True) for start in (self._before, estimator.fit)]
        fit = min(fits, key=lambda f: f.sigma)
        if fit.sigma > _POOR * self._before.sigma:
            fresh = self._structure.first_fit(record)
            if fresh is not None:
                fit = min(fit, self._structure.refit(record, fresh, moving=True), key=lambda f: f.sigma)
        known = ill_known(self._structure, fit) is None
        self.found = self.found or known
        if not known and self._keeper.rows < self._limit:
            return estimator
        self.gain_alone = None if known else self._structure.relative_gain(record, self._before)
        return self._structure.estimator(fit, record, memory=self._memory)
