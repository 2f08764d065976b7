"""After the baseline: run it beside the plant, score the difference, decide what has changed, tell the alarm book."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rtid.identify.structure import Estimator, Structure
from rtid.judge import wording
from rtid.judge.alarms import AlarmBook, Finding
from rtid.judge.baseline import PROMISED_ROWS, Baseline, Follower
from rtid.judge.change import Judged, QuantityChange, leader, surest
from rtid.judge.rechecking import Rechecking
from rtid.judge.relearning import Relearning
from rtid.judge.score import DriftScore
from rtid.kept import Kept
from rtid.report import Drift
from rtid.settings import Loop as LoopSettings

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

_RETURN = 0.7  # of the threshold: deadband of a flagged change
_POWER_95 = 7.2  # deviations between the threshold at 1e5 rows and a change seen with 95 % power


class Watch(Kept):
    """One baseline and its detectors."""

    KEPT = (
        "_follower", "_score", "_rechecking", "_rows", "_named", "_hint", "_broken",
        "_blind_rows", "_told", "_within_rows",
    )  # fmt: skip

    def __init__(
        self, settings: LoopSettings, structure: Structure, baseline: Baseline, follower: Follower, *,
        tolerances: dict[str, float],
    ) -> None:  # fmt: skip
        self.baseline = baseline
        self._settings = settings
        self._structure = structure
        self._follower = follower
        self._judged = Judged(structure, baseline, tolerances)
        self._rows = 0
        self._score = DriftScore(
            baseline.covariance,
            baseline.gamma0,
            block_rows=settings.block_rows,
            budget_rows=settings.alarm_budget.rows_per_false_alarm(settings.period_s),
            walk=offset_walk(structure, baseline),
        )
        self._named: str | None = None  # the quantity that `plant_drift` names while it stands
        self._hint = "undecided"  # what `plant_shift` names
        self._relearning: Relearning | None = None  # while a change is flagged
        self._rechecking = self._new_rechecking()  # while none is
        self._broken = False
        self._blind_rows = 0  # rows for which the data could not have shown a change of the tolerance
        self._told = Finding(False)  # what `plant_drift` says
        self._within_rows = 0  # rows for which the named quantity has been back within its tolerance

    def to_state(self) -> dict[str, Any]:
        return super().to_state() | {"relearning": self._relearning.to_state() if self._relearning else None}

    def load_state(self, state: dict[str, Any]) -> None:
        super().load_state(state)
        self._relearning = self._new_relearning() if state["relearning"] is not None else None
        if self._relearning is not None:
            self._relearning.load_state(state["relearning"])

    @property
    def provisional(self) -> bool:
        return self.baseline.fit.rows + self._rows < PROMISED_ROWS

    @property
    def unchanged(self) -> str:
        return wording.unchanged_text(self.baseline.stamp, provisional=self.provisional)

    def restart(self, inputs: Array) -> None:
        self._follower.restart(inputs)
        self._broken = True

    def step(
        self, inputs: Array, output: Array, ok: Mask, *,
        estimator: Estimator, book: AlarmBook, when: tuple[float, float],
    ) -> Estimator:  # fmt: skip
        """Judge the next m rows; `estimator`, which has learnt from them, or a fresh one since a flagged change.

        `when`: data time and stamp of the block's end.
        """
        e, phi = self._follower.run(inputs, output, ok)
        frozen = self._relearning is not None or self._judged.half_used(self._score.learnt)
        self._score.step(e, phi, frozen=frozen)
        self._rows += len(e)
        estimator = self._relearn(estimator, inputs, output, ok)
        self._decide(self._changes(estimator), book, when)
        self._note_blindness(book, when)
        return estimator

    def drift(self, estimator: Estimator, last_informative: float | None) -> Drift:
        changes = self._judged.assess(estimator.fit)
        worst = surest(changes) if changes else None
        return Drift(
            ratio=self._score.ratio,
            worst_quantity=worst.name if worst else None,
            change_pct=worst.change_pct if worst else None,
            low_pct=worst.low_pct if worst else None,
            high_pct=worst.high_pct if worst else None,
            detectable_gain_pct=self.detectable_gain_pct(),
            last_informative=last_informative,
        )

    def detectable_gain_pct(self) -> float | None:
        """Smallest gain change that would be seen within the memory with 95 % power, by recent information."""
        horizon = self._settings.memory_s / self._settings.period_s
        power, known = self._score.information()
        gradient = self._judged.gain_gradient
        column = int(np.flatnonzero(gradient)[0]) if np.count_nonzero(gradient) == 1 else None
        if column is None:
            return self._detectable_by_inverse(power, known, gradient, horizon)
        information = float(power[column, column])
        if information <= 0.0:
            return None
        g = power[:, column]
        variance = 1.0 / (information * horizon) + float(g @ known @ g) / information**2
        return 100.0 * _POWER_95 * math.sqrt(variance)

    def _detectable_by_inverse(self, power: Array, known: Array, gradient: Array, horizon: float) -> float | None:
        size = np.sqrt(np.diag(power))
        if not (size > 0.0).all():
            return None
        unit = power / np.outer(size, size) + 1e-9 * np.eye(len(size))
        g = gradient / size
        variance = float(g @ np.linalg.solve(unit, g)) / horizon + float(gradient @ known @ gradient)
        return 100.0 * _POWER_95 * math.sqrt(variance) if math.isfinite(variance) else None

    def _relearn(self, estimator: Estimator, inputs: Array, output: Array, ok: Mask) -> Estimator:
        ratio = self._score.ratio
        if self._relearning is None and ratio >= 1.0:
            self._relearning, self._rechecking = self._new_relearning(), self._new_rechecking()
        elif self._relearning is not None and ratio < _RETURN and self._named is None:
            self._relearning, self._hint = None, "undecided"
        keeper = self._relearning or self._rechecking
        estimator = keeper.step(estimator, inputs, output, ok, new_stretch=self._broken)
        self._broken = False
        return estimator

    def _new_rechecking(self) -> Rechecking:
        memory = self._settings.memory_s / self._settings.period_s
        return Rechecking(self._structure, memory=memory, settling=self._structure.settling_rows(self.baseline.fit))

    def _new_relearning(self) -> Relearning:
        memory = self._settings.memory_s / self._settings.period_s
        return Relearning(self._structure, self.baseline.fit, memory=memory)

    def _changes(self, estimator: Estimator) -> list[QuantityChange]:
        """What has changed since the baseline, while a change is flagged; a lost gain where no model fits any more."""
        if self._relearning is None:
            return []
        if self._relearning.gain_alone is not None:
            return [self._judged.gain_change(*self._relearning.gain_alone)]
        return self._judged.assess(estimator.fit)

    def _decide(self, changes: list[QuantityChange], book: AlarmBook, when: tuple[float, float]) -> None:
        time_s, stamp = when
        by_name = {q.name: q for q in changes}
        beyond = [q for q in changes if q.beyond] if self._relearning and self._relearning.told else []
        named = by_name.get(self._named) if self._named else None
        self._within_rows = self._within_rows + self._settings.block_rows if named is not None and named.within else 0
        if beyond and (named is None or not named.beyond):
            self._named = surest(beyond).name
        elif self._within_rows * self._settings.period_s > self._settings.memory_s:
            self._named = None
        told = by_name.get(self._named) if self._named else None
        if told is None:
            self._told = Finding(False)
        elif told.beyond:
            self._told = self._finding(told)
        book.note("plant_drift", self._told, time_s=time_s, stamp=stamp)
        shift = self._relearning is not None and self._named is None
        gone = Finding(False, "plant_drift stands in its place" if self._named else "")
        book.note("plant_shift", self._shift_finding(changes) if shift else gone, time_s=time_s, stamp=stamp)

    def _finding(self, change: QuantityChange) -> Finding:
        text = wording.drift_text(change, self.baseline.stamp)
        return Finding(True, text, change.name, change.change_pct, change.low_pct, change.high_pct)

    def _shift_finding(self, changes: list[QuantityChange]) -> Finding:
        found = leader(changes) if self._relearning and self._relearning.told else None
        if found is not None and self._hint == "undecided":
            self._hint = found.name
        change = next((q for q in changes if q.name == self._hint), None)
        text = wording.shift_text(change, self.baseline.stamp)
        if change is None:
            return Finding(True, text, "undecided")
        return Finding(True, text, change.name, change.change_pct, change.low_pct, change.high_pct)

    def _note_blindness(self, book: AlarmBook, when: tuple[float, float]) -> None:
        seen = self.detectable_gain_pct()
        tolerance = self._settings.tolerance.gain_pct
        seeing = seen is not None and seen <= tolerance
        self._blind_rows = 0 if seeing else self._blind_rows + self._settings.block_rows
        blind = self._blind_rows * self._settings.period_s > self._settings.memory_s
        finding = Finding(blind, wording.blind_text(seen, tolerance))
        book.note("cannot_judge", finding, time_s=when[0], stamp=when[1])


def offset_walk(structure: Structure, baseline: Baseline) -> float:
    """Variance a row, in units of the noise, by which the offset may walk: an unmeasured load is no plant change."""
    share = min(1.0, structure.period / structure.slowest(baseline.fit)) ** 2
    gamma0 = baseline.gamma0
    moving = float(gamma0[0, 0] - gamma0[0, -1] ** 2 / gamma0[-1, -1])
    return 1e-4 * share * (moving + 1.0)
