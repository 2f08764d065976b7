"""One loop: rows in, a report out. Joins estimation, judgement and meaning; knows no clock, thread, file or socket."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rtid.identify.equation_error import EquationError
from rtid.identify.output_error import OutputError
from rtid.identify.structure import Estimator, Fit, Structure
from rtid.judge import wording
from rtid.judge.alarms import AlarmBook, Finding
from rtid.judge.baseline import Baseline, Follower
from rtid.judge.data_checks import DataChecks
from rtid.judge.gate import GateKeeper
from rtid.judge.health import health_of
from rtid.judge.learning import Learner
from rtid.judge.watch import Watch
from rtid.model import snapshot as snapshots
from rtid.model.quantities import quantities, units_of, unknown
from rtid.model.validation import RecentRows
from rtid.report import Drift, Health, Quantity, Report, State, Transition
from rtid.rows import Rows
from rtid.settings import Loop as LoopSettings
from rtid.settings import Tolerance

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

BRIDGED_TICKS = 3  # a hole of more missing ticks is a gap
_VALIDATION_ROWS = 2000


@dataclass(frozen=True, slots=True)
class _Moment:
    """Data time and label of the last row that was seen."""

    time_s: float
    stamp: float


class Loop:
    """What rtid knows about one plant.

    `advance` takes the rows of one block in order; `silence` is called while no reading comes. Between two calls
    nothing happens: the same rows give the same digits live and in replay.
    """

    def __init__(self, settings: LoopSettings) -> None:
        self.settings = settings
        self._columns = len(settings.inputs)
        self._output = settings.signals.index(settings.output)
        self._structure = structure_of(settings)
        self._units = units_of(settings.units.get(settings.inputs[0], ""), settings.units.get(settings.output, ""))
        self._tolerances = tolerances_of(settings.tolerance)
        self._book = AlarmBook(settings.alarms)
        self._checks = DataChecks(settings.signals, ranges=settings.ranges, limits=settings.limits)
        self._gate = GateKeeper(settings.active_when, settings.signals, settings.period_s)
        self._learner: Learner | None = self._new_learner()
        self._estimator: Estimator | None = None
        self._watch: Watch | None = None
        self._baseline_quantities: dict[str, Quantity] | None = None
        self._recent = RecentRows(_VALIDATION_ROWS, settings.block_rows)
        self._state: State = "waiting"
        self._samples = 0
        self._settle = 0  # rows that still teach nothing after a gap
        self._broken = True  # the next rows do not follow on the last ones that were used
        self._output_shift = 0.0
        self._last_report_s = -math.inf
        self._actions: list[Transition] = []  # events that are no alarms, not yet reported
        self._last_informative: float | None = None
        self._health: tuple[Health, str] = ("function_check", "waiting: no reading yet")
        self._health_since: float | None = None
        self.report: Report | None = None

    @property
    def state(self) -> State:
        return self._state

    def advance(self, rows: Rows) -> Report:
        """Take in the next block (or the part of one that a gap or a stop closed early)."""
        now = _Moment(rows.time_s + (len(rows.values) - 1) * self.settings.period_s, rows.stamp)
        self._book.note("data_stale", Finding(False), time_s=now.time_s, stamp=now.stamp)
        self._note_gap(rows, now)
        self._output_shift = rows.output_shift_s
        credible = self._checks.credible(rows.values)
        for alarm, signal, finding in self._checks.findings(rows.values):
            self._book.note(alarm, finding, time_s=now.time_s, stamp=now.stamp, signal=signal)
        active = self._gate.active(rows.values)
        for first, last in _runs(active):
            self._use(rows.values[first:last], credible[first:last], now)
            self._broken = last < len(active)
        self._state = self._state_after(bool(active[-1]))
        return self._say(now)

    def silence(self, seconds: float, stamp: float) -> Report | None:
        """No reading has come for `seconds`. A report when that changes something, else None."""
        if self.report is None or seconds < self.settings.stale_after_s or self._state == "stale":
            return None
        now = _Moment(self.report.time_s + seconds, stamp)
        self._state = "stale"
        self._book.note(
            "data_stale", Finding(True, wording.stale_text(seconds)), time_s=now.time_s, stamp=stamp
        )
        return self._say(now, due=True)

    def snapshot(self, reason: str) -> dict[str, Any]:
        """Model of now with its validation; every field but schema, version, time and node. Stamps stay numbers."""
        settings, watch = self.settings, self._watch
        report = self.report
        drift = report.drift if report else Drift()
        found = self._quantities()
        return {
            "loop": settings.name, "reason": reason, "state": self._state, "region": None,
            "structure": settings.model.structure, "order": settings.model.order,
            "integrating": settings.model.integrating, "period_s": settings.period_s, "samples": self._samples,
            **snapshots.model_part(self._structure, self._fit(), output_shift=self._output_shift),
            "quantities": found,
            "validation": snapshots.validation_part(self._recent.validate()),
            "information": {
                "detectable_gain_pct": drift.detectable_gain_pct, "last_informative": self._last_informative,
            },
            "baseline": None if watch is None else {
                "id": watch.identity, "time": watch.baseline.stamp, "provisional": watch.provisional,
                "quantities": self._baseline_quantities,
            },
            "change": snapshots.change_part(found, self._baseline_quantities),
            "alarms": list(self._book.active()),
            "caution": snapshots.CAUTION,
        }  # fmt: skip

    def _new_learner(self) -> Learner:
        settings = self.settings
        return Learner(
            self._structure,
            after_rows=math.ceil(settings.baseline.after_s / settings.period_s),
            memory=settings.memory_s / settings.period_s,
            tolerances=self._tolerances,
        )

    def _note_gap(self, rows: Rows, now: _Moment) -> None:
        gap = rows.restart or rows.gap_s > 0.0
        self._broken = self._broken or gap
        text = wording.restart_text() if rows.restart else wording.gap_text(rows.gap_s)
        self._book.note("data_gap", Finding(gap, text), time_s=now.time_s, stamp=now.stamp)

    def _use(self, values: Array, credible: Mask, now: _Moment) -> None:
        """Learn from, or judge, consecutive active rows."""
        inputs, output = values[:, : self._columns], values[:, self._output]
        ok = credible & np.isfinite(output)
        if self._broken:
            self._restart(inputs[0])
        if self._settle:
            ok = ok & (np.arange(len(ok)) >= self._settle)
            self._settle = max(0, self._settle - len(ok))
        self._samples += int(ok.sum())
        if self._learner is not None:
            self._learner.add(inputs, output, ok, new_stretch=self._broken)
        self._broken = False
        self._follow(inputs, output, ok, now)
        if self._learner is not None:
            self._learn(self._learner, now)

    def _restart(self, inputs: Array) -> None:
        fit = self._fit()
        self._settle = self._structure.settling_rows(fit) if fit is not None else 0
        if self._estimator is not None:
            self._estimator.restart(inputs)
        if self._watch is not None:
            self._watch.restart(inputs)

    def _follow(self, inputs: Array, output: Array, ok: Mask, now: _Moment) -> None:
        if self._estimator is None:
            return
        one_step, free_run, good = self._estimator.step(inputs, output, ok)
        self._recent.add(
            one_step=one_step[good], free_run=free_run[good], output=output[good], drive=inputs[good, 0]
        )
        if self._estimator.informed()[0]:
            self._last_informative = now.stamp
        self._book.note(
            "estimate_invalid",
            Finding(self._estimator.invalid, "The estimate met numbers that it cannot go on from; it stands still."),
            time_s=now.time_s,
            stamp=now.stamp,
        )
        if self._watch is not None:
            self._estimator = self._watch.step(
                inputs, output, ok, estimator=self._estimator, book=self._book, when=(now.time_s, now.stamp)
            )

    def _learn(self, learner: Learner, now: _Moment) -> None:
        found = learner.advance(self._samples, now.stamp)
        self._estimator = learner.estimator
        if found is not None:
            self._accept(*found)
            self._actions.append(self._baseline_event(now))

    def _baseline_event(self, now: _Moment) -> Transition:
        assert self._watch is not None
        text = wording.baseline_text(self._watch.identity, self._quantities(), provisional=self._watch.provisional)
        return Transition(None, None, "low", text, now.time_s, now.stamp, action="baseline")

    def _accept(self, baseline: Baseline, follower: Follower) -> None:
        self._learner = None
        self._baseline_quantities = quantities(
            self._structure, baseline.fit, self._units, output_shift=self._output_shift
        )
        self._watch = Watch(self.settings, self._structure, baseline, follower, tolerances=self._tolerances)

    def _fit(self) -> Fit | None:
        return self._estimator.fit if self._estimator is not None else None

    def _quantities(self) -> dict[str, Quantity]:
        fit = self._fit()
        if fit is None:
            return unknown(self.settings.model.order, self._units)
        return quantities(self._structure, fit, self._units, output_shift=self._output_shift)

    def _state_after(self, active: bool) -> State:
        if not active:
            return "inactive"
        return "watching" if self._watch is not None else "learning"

    def _say(self, now: _Moment, *, due: bool = False) -> Report:
        transitions = (*self._actions, *self._book.take_transitions())
        self._actions = []
        due = due or now.time_s - self._last_report_s >= self.settings.publish_every_s or self.report is None
        if not due and not transitions and self.report is not None and self.report.state == self._state:
            return self._repeat(now)
        self._last_report_s = now.time_s if due else self._last_report_s
        drift = Drift(last_informative=self._last_informative)
        if self._watch is not None and self._estimator is not None:
            drift = self._watch.drift(self._estimator, self._last_informative)
        self._judge_health(now)
        self.report = Report(
            loop=self.settings.name, time_s=now.time_s, stamp=now.stamp, samples=self._samples, state=self._state,
            health=self._health[0], since=self._health_since or now.stamp, reason=self._health[1], due=due,
            quantities=self._quantities(), drift=drift, transitions=transitions, alarms=self._book.active(),
        )  # fmt: skip
        return self.report

    def _repeat(self, now: _Moment) -> Report:
        """Nothing to say between two publications: the last report with the present time."""
        last = self.report
        assert last is not None
        self.report = Report(
            loop=last.loop, time_s=now.time_s, stamp=now.stamp, samples=self._samples, state=last.state,
            health=last.health, since=last.since, reason=last.reason, due=False, quantities=last.quantities,
            drift=last.drift, alarms=last.alarms,
        )  # fmt: skip
        return self.report

    def _judge_health(self, now: _Moment) -> None:
        detail = self._learner.progress(self._samples) if self._learner and self._state == "learning" else ""
        unchanged = self._watch.unchanged if self._watch else ""
        health = health_of(self._state, self._book.active(), detail=detail, unchanged=unchanged)
        if health[0] != self._health[0] or self._health_since is None:
            self._health_since = now.stamp
        self._health = health


def structure_of(settings: LoopSettings) -> Structure:
    model = settings.model
    kind = EquationError if model.structure == "equation_error" else OutputError
    return kind(model.order, settings.period_s, model.dead_time_s)


def tolerances_of(tolerance: Tolerance) -> dict[str, float]:
    """Fraction of each quantity's baseline value."""
    time_constant = tolerance.time_constant_pct / 100.0
    return {
        "gain": tolerance.gain_pct / 100.0,
        "time_constant_1": time_constant,
        "time_constant_2": time_constant,
        "natural_frequency": time_constant,
        "damping_ratio": time_constant,
        "dead_time": tolerance.dead_time_pct / 100.0,
    }


def _runs(active: Mask) -> list[tuple[int, int]]:
    """First and last-plus-one of every stretch of true."""
    edges = np.flatnonzero(np.diff(np.concatenate(([False], active, [False])).astype(np.int8)))
    return [(int(a), int(b)) for a, b in zip(edges[::2], edges[1::2], strict=True)]
