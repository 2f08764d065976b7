"""From the first row to the baseline: when to fit, when to fit again, when to accept."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray

from rtid.identify.record import RecordKeeper
from rtid.identify.structure import Estimator, Structure, restored_estimator
from rtid.judge.baseline import Baseline, Follower, Refusal, accept
from rtid.kept import Kept

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

KEPT_ROWS = 20_000
FIRST_FIT_ROWS = 200
_RETRY = 1.4  # the next attempt at a fit comes at this many times the rows
_REFIT = 2.0


class Learner(Kept):
    """Keeps the rows, starts the estimator, and accepts the baseline when the data carry one.

    `after_rows`: the least number of rows before a baseline; `memory`: the estimator's, in rows.
    """

    KEPT = ("_keeper", "_next_fit", "_next_attempt", "reason")

    def __init__(
        self, structure: Structure, *, after_rows: int, memory: float, tolerances: dict[str, float]
    ) -> None:
        self._structure = structure
        self._after_rows = after_rows
        self._memory = memory
        self._tolerances = tolerances
        self._keeper = RecordKeeper(KEPT_ROWS)
        self._next_fit = float(FIRST_FIT_ROWS)
        self._next_attempt = float(after_rows)
        self.estimator: Estimator | None = None
        self.reason = "learning: no model yet; the input must move"

    def to_state(self) -> dict[str, Any]:
        return super().to_state() | {"estimator": self.estimator.to_state() if self.estimator else None}

    def load_state(self, state: dict[str, Any]) -> None:
        super().load_state(state)
        if state["estimator"] is not None:
            self.estimator = restored_estimator(self._structure, state["estimator"], memory=self._memory)

    @property
    def rows(self) -> int:
        return self._keeper.rows

    def add(self, inputs: Array, output: Array, ok: Mask, *, new_stretch: bool) -> None:
        self._keeper.append(inputs, output, ok, new_stretch=new_stretch)

    def advance(self, rows_seen: int, stamp: float) -> tuple[Baseline, Follower] | None:
        """At a block end: fit when due; the baseline once it is accepted. `rows_seen`: accepted rows so far."""
        if self._keeper.rows >= self._next_fit:
            self._fit()
        if self.estimator is None or rows_seen < self._next_attempt:
            return None
        found = self._attempt(stamp)
        if isinstance(found, Refusal):
            self._refuse(found, rows_seen)
            return None
        return found

    def progress(self, rows_seen: int) -> str:
        """In plain words, what is still missing."""
        left = (self._next_attempt - rows_seen) * self._structure.period
        if self.estimator is None or left <= 0.0:
            return self.reason
        return f"{self.reason}; about {_duration(left)} more of moves"

    def _fit(self) -> None:
        record = self._keeper.record()
        fit = self._structure.first_fit(record)
        self._next_fit = (_RETRY if fit is None else _REFIT) * self._keeper.rows
        if fit is not None:
            self.estimator = self._structure.estimator(fit, record, memory=self._memory)
            self.reason = "learning: a first model is there, the baseline is not"

    def _attempt(self, stamp: float) -> tuple[Baseline, Follower] | Refusal:
        assert self.estimator is not None
        record, fit = self._keeper.record(), self.estimator.fit
        found = accept(self._structure, record, fit, tolerances=self._tolerances, stamp=stamp)
        if not isinstance(found, Refusal):
            self.estimator = self._structure.estimator(found[0].fit, record, memory=self._memory)
        return found

    def _refuse(self, refusal: Refusal, rows_seen: int) -> None:
        self.reason = refusal.reason
        if refusal.stale_half:
            self._keeper.drop_older_half()
            self._next_fit = _RETRY * self._keeper.rows
            self._next_attempt = rows_seen + 0.5 * self._after_rows
        else:
            self._next_attempt = _RETRY * rows_seen


def _duration(seconds: float) -> str:
    if seconds < 90.0:
        return f"{seconds:.0f} s"
    return f"{seconds / 60.0:.0f} min" if seconds < 5400.0 else f"{seconds / 3600.0:.1f} h"
