"""What rtid knows of one plant: the rows it learns from, the estimate that follows, the baseline it is held against."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rtid.actions import Action, ActionRefused
from rtid.identify.equation_error import EquationError
from rtid.identify.output_error import OutputError
from rtid.identify.record import blank_record
from rtid.identify.structure import Estimator, Fit, Structure, restored_estimator
from rtid.judge import wording
from rtid.judge.alarms import AlarmBook, Finding
from rtid.judge.baseline import Baseline, Follower, follower_of
from rtid.judge.baselines import AcceptedBaseline, BaselineBook
from rtid.judge.learning import Learner
from rtid.judge.watch import Watch
from rtid.kept import Kept
from rtid.model import snapshot as snapshots
from rtid.model.quantities import names_of, quantities, units_of, unknown
from rtid.model.validation import RecentRows
from rtid.report import Drift, Quantity, Transition
from rtid.settings import Loop as LoopSettings
from rtid.settings import Tolerance

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
When = tuple[float, float]  # data time and stamp

_VALIDATION_ROWS = 2000


class Knowledge(Kept):
    """Takes in rows that count, in order. Either it learns a baseline, or it watches against one."""

    KEPT = (
        "baselines", "samples", "last_informative", "output_shift", "broken", "_recent", "_asked", "_settle",
    )  # fmt: skip

    def __init__(self, settings: LoopSettings) -> None:
        self._settings = settings
        self._columns = len(settings.inputs)
        self._output = settings.signals.index(settings.output)
        self._structure = structure_of(settings)
        units = settings.units
        self._units = units_of([units.get(name, "") for name in settings.inputs], units.get(settings.output, ""))
        self._tolerances = tolerances_of(settings.tolerance, len(settings.inputs))
        self._memory = settings.memory_s / settings.period_s
        self._learner: Learner | None = self._new_learner()
        self._estimator: Estimator | None = None
        self._watch: Watch | None = None
        self._recent = RecentRows(_VALIDATION_ROWS, settings.block_rows)
        self._asked: Action | None = None  # the rebaselining under way
        self._settle = 0  # rows that still teach nothing after a gap
        self.baselines = BaselineBook(settings.name)
        self.samples = 0
        self.last_informative: float | None = None  # stamp
        self.output_shift = 0.0  # how much later than its tick the output is taken, s
        self.broken = True  # the next rows do not follow on the last ones

    @property
    def watching(self) -> bool:
        return self._watch is not None

    @property
    def progress(self) -> str:
        """What the baseline still waits for."""
        return self._learner.progress(self.samples) if self._learner else ""

    @property
    def unchanged(self) -> str:
        """The words for good health."""
        return self._watch.unchanged if self._watch else ""

    def use(self, values: Array, credible: Mask, *, book: AlarmBook, when: When) -> Transition | None:
        """Learn from, or judge, consecutive rows (m, n); a baseline that was accepted on the way is an event."""
        inputs, output = values[:, : self._columns], values[:, self._output]
        ok = credible & np.isfinite(output)
        if self.broken:
            self._restart(inputs[0])
        if self._settle:
            ok = ok & (np.arange(len(ok)) >= self._settle)
            self._settle = max(0, self._settle - len(ok))
        self.samples += int(ok.sum())
        if self._learner is not None:
            self._learner.add(inputs, output, ok, new_stretch=self.broken)
        self.broken = False
        self._follow(inputs, output, ok, book=book, when=when)
        return self._learn(self._learner, when) if self._learner is not None else None

    def quantities(self) -> dict[str, Quantity]:
        fit = self._fit
        if fit is None:
            return unknown(names_of(self._settings.model.order, self._columns), self._units)
        return quantities(self._structure, fit, self._units, output_shift=self.output_shift)

    def drift(self) -> Drift:
        if self._watch is None or self._estimator is None:
            return Drift(last_informative=self.last_informative)
        return self._watch.drift(self._estimator, self.last_informative)

    def learn_anew(self, action: Action) -> None:
        """Put the baseline aside and learn another; the estimate goes on."""
        self._learner, self._asked = self._new_learner(), action
        self._learner.estimator = self._estimator
        self._watch, self.samples = None, 0
        self.baselines.set_aside()

    def restore(self, identity: str) -> None:
        """Put an old baseline in force. Raises ActionRefused when there is none of that name."""
        found = self.baselines.restore(identity)
        if found is None:
            known = ", ".join(b.identity for b in self.baselines.all) or "none yet"
            raise ActionRefused(f"there is no baseline {identity!r}; there are: {known}")
        self.adopt(found)

    def adopt(self, accepted: AcceptedBaseline) -> None:
        """Watch against this baseline, learnt here or in an earlier life; the estimate, if there is one, goes on."""
        self.baselines.accept(accepted)
        fit = accepted.baseline.fit
        self._learner, self._asked, self.broken = None, None, True
        self._watch = self._new_watch(accepted.baseline, follower_of(self._structure, accepted.baseline))
        if self._estimator is None:
            self._estimator = self._structure.estimator(fit, blank_record(fit.centre), memory=self._memory)

    def snapshot_part(self) -> dict[str, Any]:
        """transfer, reduced, parameters, quantities, validation, information, baseline and change."""
        found, baseline = self.quantities(), self.baselines.present
        return {
            "samples": self.samples,
            **snapshots.model_part(self._structure, self._fit, output_shift=self.output_shift),
            "quantities": found,
            "validation": snapshots.validation_part(self._recent.validate()),
            "information": {
                "detectable_gain_pct": self._watch.detectable_gain_pct() if self._watch else None,
                "last_informative": self.last_informative,
            },
            "baseline": None if self._watch is None or baseline is None else {
                "id": baseline.identity, "time": baseline.baseline.stamp, "provisional": self._watch.provisional,
                "quantities": baseline.quantities,
            },
            "change": snapshots.change_part(found, baseline.quantities if baseline else None),
        }  # fmt: skip

    def to_state(self) -> dict[str, Any]:
        return super().to_state() | {
            "learner": self._learner.to_state() if self._learner else None,
            "estimator": self._estimator.to_state() if self._estimator and not self._learner else None,
            "watch": self._watch.to_state() if self._watch else None,
        }

    def load_state(self, state: dict[str, Any]) -> None:
        super().load_state(state)
        self._learner = self._new_learner() if state["learner"] is not None else None
        if self._learner is not None:
            self._learner.load_state(state["learner"])
            self._estimator = self._learner.estimator
        else:
            self._estimator = restored_estimator(self._structure, state["estimator"], memory=self._memory)
        present = self.baselines.present
        if present is not None:
            self._watch = self._new_watch(present.baseline, follower_of(self._structure, present.baseline))
            self._watch.load_state(state["watch"])

    def _new_learner(self) -> Learner:
        settings = self._settings
        return Learner(
            self._structure,
            after_rows=math.ceil(settings.baseline.after_s / settings.period_s),
            memory=self._memory,
            tolerances=self._tolerances,
        )

    def _new_watch(self, baseline: Baseline, follower: Follower) -> Watch:
        return Watch(self._settings, self._structure, baseline, follower, tolerances=self._tolerances)

    @property
    def _fit(self) -> Fit | None:
        return self._estimator.fit if self._estimator is not None else None

    def _restart(self, inputs: Array) -> None:
        fit = self._fit
        self._settle = self._structure.settling_rows(fit) if fit is not None else 0
        if self._estimator is not None:
            self._estimator.restart(inputs)
        if self._watch is not None:
            self._watch.restart(inputs)

    def _follow(self, inputs: Array, output: Array, ok: Mask, *, book: AlarmBook, when: When) -> None:
        if self._estimator is None:
            return
        one_step, free_run, good = self._estimator.step(inputs, output, ok)
        self._recent.add(
            one_step=one_step[good], free_run=free_run[good], output=output[good], drive=inputs[good, 0]
        )
        if self._estimator.informed()[0]:
            self.last_informative = when[1]
        finding = Finding(self._estimator.invalid, wording.INVALID)
        book.note("estimate_invalid", finding, time_s=when[0], stamp=when[1])
        if self._watch is not None:
            self._estimator = self._watch.step(
                inputs, output, ok, estimator=self._estimator, book=book, when=when
            )

    def _learn(self, learner: Learner, when: When) -> Transition | None:
        found = learner.advance(self.samples, when[1])
        self._estimator = learner.estimator
        return self._accept(*found, when=when) if found is not None else None

    def _accept(self, baseline: Baseline, follower: Follower, *, when: When) -> Transition:
        self._learner = None
        self._watch = self._new_watch(baseline, follower)
        known = quantities(self._structure, baseline.fit, self._units, output_shift=self.output_shift)
        identity, asked = self.baselines.next_identity(), self._asked
        by, because, reason = (asked.by, asked.because or "", asked.reason) if asked else ("", "", "")
        self.baselines.accept(AcceptedBaseline(identity, baseline, known, by, because, reason))
        self._asked = None
        text = wording.baseline_text(identity, known, provisional=self._watch.provisional)
        detail = {"baseline": identity}
        return Transition(None, None, "low", text, when[0], when[1], action="baseline", by=by or None, detail=detail)


def structure_of(settings: LoopSettings) -> Structure:
    model = settings.model
    least = settings.resolutions.get(settings.output, 0.0) / math.sqrt(12.0)  # deviation of rounding to one count
    if model.structure == "equation_error":
        return EquationError(model.order, settings.period_s, model.dead_time_s, least_noise=least)
    return OutputError(
        model.order, settings.period_s, model.dead_time_s, inputs=len(settings.inputs), least_noise=least
    )


def tolerances_of(tolerance: Tolerance, inputs: int = 1) -> dict[str, float]:
    """Fraction of each quantity's baseline value."""
    time_constant = tolerance.time_constant_pct / 100.0
    later = range(2, inputs + 1)
    return {
        **{f"gain_{i}": tolerance.gain_pct / 100.0 for i in later},
        **{f"dead_time_{i}": tolerance.dead_time_pct / 100.0 for i in later},
        "gain": tolerance.gain_pct / 100.0,
        "time_constant_1": time_constant,
        "time_constant_2": time_constant,
        "natural_frequency": time_constant,
        "damping_ratio": time_constant,
        "dead_time": tolerance.dead_time_pct / 100.0,
    }
