"""One loop: rows in, a report out. Joins estimation, judgement and meaning; knows no clock, thread, file or socket."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rtid.actions import Action, ActionRefused
from rtid.judge import wording
from rtid.judge.alarms import AlarmBook, Finding
from rtid.judge.baselines import AcceptedBaseline
from rtid.judge.data_checks import DataChecks
from rtid.judge.gate import GateKeeper
from rtid.judge.health import health_of
from rtid.kept import Kept
from rtid.knowledge import Knowledge
from rtid.model.snapshot import CAUTION
from rtid.operator_actions import Hold, act_on_alarm, action_event, check_action, recalled_action
from rtid.report import Health, Report, State, Transition
from rtid.rows import Rows
from rtid.settings import Loop as LoopSettings

Mask = NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class _Moment:
    """Data time and label."""

    time_s: float
    stamp: float


class Loop(Kept):
    """What rtid knows about one plant.

    `advance` takes the rows of one block in order; `silence` is called while no reading comes; `act` when a person
    does something. Between two calls nothing happens: the same rows give the same digits live and in replay.
    """

    KEPT = (
        "report", "_knowledge", "_book", "_gate", "_hold", "_state", "_last_row_s", "_last_report_s", "_health",
        "_health_since",
    )  # fmt: skip

    def __init__(self, settings: LoopSettings) -> None:
        self.settings = settings
        self._knowledge = Knowledge(settings)
        self._book = AlarmBook(settings.alarms)
        self._checks = DataChecks(settings.signals, ranges=settings.ranges, limits=settings.limits)
        self._gate = GateKeeper(settings.active_when, settings.signals, settings.period_s)
        self._hold = Hold()
        self._actions: list[Transition] = []  # events that are no alarms, not yet reported
        self._state: State = "waiting"
        self._restarted = False
        self._last_row_s = 0.0  # data time
        self._last_report_s: float | None = None  # data time of the last report that was due
        self._health: tuple[Health, str] = ("function_check", "waiting: no reading yet")
        self._health_since: float | None = None
        self.report: Report | None = None

    @property
    def state(self) -> State:
        return self._state

    def advance(self, rows: Rows) -> Report:
        """Take in the next block (or the part of one that a gap or a stop closed early)."""
        now = _Moment(rows.time_s + (len(rows.values) - 1) * self.settings.period_s, rows.stamp)
        if rows.restart:
            self._shift_clock(rows.time_s - self._last_row_s)
        self._last_row_s = now.time_s
        self._book.note("data_stale", Finding(False), time_s=now.time_s, stamp=now.stamp)
        self._note_gap(rows, now)
        self._knowledge.output_shift = rows.output_shift_s
        self._end_what_ends(now)
        if self._hold.standing(now.time_s):
            self._knowledge.broken, self._state = True, "held"
        else:
            self._state = self._take_in(rows, now)
        return self._say(now)

    def silence(self, seconds: float, stamp: float) -> Report | None:
        """No reading has come for `seconds`. A report when that changes something, else None."""
        if self.report is None or seconds < self.settings.stale_after_s:
            return None
        now = _Moment(self._last_row_s + seconds, stamp)
        fresh, self._state = self._state != "stale", "stale"
        self._end_what_ends(now)
        self._book.note("data_stale", Finding(True, wording.stale_text(seconds)), time_s=now.time_s, stamp=stamp)
        if not fresh and not self._actions and not self._book.has_transitions:
            return None
        return self._say(now, due=fresh)

    def act(self, action: Action, stamp: float, *, silent_s: float = 0.0) -> Report:
        """A person's action, `silent_s` after the last reading. Raises ActionRefused with one line."""
        check_action(action)
        if self.report is None:
            return self._remark(action, stamp)
        now = _Moment(max(self.report.time_s, self._last_row_s + silent_s), stamp)
        if action.name in ("ack", "shelve", "unshelve"):
            act_on_alarm(self._book, action, time_s=now.time_s, stamp=stamp)
        else:
            text = self._do(action, now)
            self._actions.append(action_event(action, text, time_s=now.time_s, stamp=stamp))
        return self._say(now, due=True)

    @property
    def baselines(self) -> tuple[AcceptedBaseline, ...]:
        """Every one there has been, in the order of acceptance."""
        return tuple(self._knowledge.baselines.all)

    @property
    def baseline(self) -> str | None:
        """The one in force; None while one is learnt."""
        present = self._knowledge.baselines.present
        return None if present is None else present.identity

    def skip_baselines(self, last: int) -> None:
        """The numbers of baselines go on after `last`."""
        self._knowledge.baselines.skip(last)

    def recall(self, event: Transition, baseline: AcceptedBaseline | None = None) -> None:
        """The effect of an event that was told after this state was kept; nothing is told again.

        `baseline` is the one that the event names.
        """
        if event.alarm is not None:
            self._book.recall(event)
        elif baseline is not None:
            self._knowledge.adopt(baseline)
        elif event.action == "rebaseline":
            self._knowledge.learn_anew(recalled_action(event))
        else:
            self._hold.recall(event)

    def restarted(self, stamp: float) -> None:
        """The service was away: `report` says what is known, and nothing is good until readings come."""
        now = _Moment(self.report.time_s if self.report else self._last_row_s, stamp)
        self._state, self._restarted = "held" if self._hold.until_s is not None else "waiting", True
        self._judge_health(now)
        self.report = self._describe(now, due=True, transitions=())

    @property
    def hold(self) -> tuple[str, float] | None:
        """Who holds the loop, and until when (stamp)."""
        until_s = self._hold.until_s
        return None if until_s is None else (self._hold.by, self._as_stamp(until_s))

    @property
    def shelved(self) -> tuple[tuple[str, str | None, float], ...]:
        """The shelved alarms: name, signal, and until when (stamp)."""
        return tuple((alarm, signal, self._as_stamp(end)) for alarm, signal, end in self._book.shelved())

    @property
    def open_alarms(self) -> frozenset[tuple[str, str | None]]:
        """Name and signal of the alarms that are not both back to normal and acknowledged."""
        return self._book.open

    @property
    def progress(self) -> str:
        """What the baseline still waits for; empty while there is one."""
        return self._knowledge.progress

    def snapshot(self, reason: str) -> dict[str, Any]:
        """Model of now with its validation; every field but schema, version, time and node. Stamps stay numbers."""
        model = self.settings.model
        return {
            "loop": self.settings.name, "reason": reason, "state": self._state, "region": None,
            "structure": model.structure, "order": model.order, "integrating": model.integrating,
            "period_s": self.settings.period_s, **self._knowledge.snapshot_part(),
            "alarms": list(self._book.active()), "caution": CAUTION,
        }  # fmt: skip

    def to_state(self) -> dict[str, Any]:
        """Everything that the next rows depend on, with every digit, as plain values, arrays and frozen records."""
        return super().to_state() | {"identity": identity_of(self.settings)}

    @classmethod
    def from_state(cls, settings: LoopSettings, state: dict[str, Any]) -> Loop:
        """A loop that goes on. Raises ActionRefused when the state is that of another plant, KeyError for a bad one."""
        if state["identity"] != identity_of(settings):
            raise ActionRefused("its signals, period or model are others now: it learns anew")
        new = cls(settings)
        new.load_state(state)
        return new

    def _remark(self, action: Action, stamp: float) -> Report:
        """Before the first reading, when there is no data time yet, only a remark makes sense."""
        if action.name != "note":
            raise ActionRefused("no reading has come yet: there is nothing to act on")
        remark = action_event(action, action.text, time_s=self._last_row_s, stamp=stamp)
        return self._describe(_Moment(self._last_row_s, stamp), due=False, transitions=(remark,))

    def _as_stamp(self, time_s: float) -> float:
        return time_s if self.report is None else self.report.stamp + time_s - self.report.time_s

    def _take_in(self, rows: Rows, now: _Moment) -> State:
        credible = self._checks.credible(rows.values)
        for alarm, signal, finding in self._checks.findings(rows.values):
            self._book.note(alarm, finding, time_s=now.time_s, stamp=now.stamp, signal=signal)
        active = self._gate.active(rows.values)
        for first, last in _runs(active):
            event = self._knowledge.use(
                rows.values[first:last], credible[first:last], book=self._book, when=(now.time_s, now.stamp)
            )
            self._actions += [event] if event is not None else []
            self._knowledge.broken = last < len(active)
        return self._open_state() if active[-1] else "inactive"

    def _open_state(self) -> State:
        return "watching" if self._knowledge.watching else "learning"

    def _note_gap(self, rows: Rows, now: _Moment) -> None:
        gap = rows.restart or rows.gap_s > 0.0
        self._knowledge.broken = self._knowledge.broken or gap
        text = wording.restart_text() if rows.restart else wording.gap_text(rows.gap_s)
        self._book.note("data_gap", Finding(True, text) if gap else Finding(False), time_s=now.time_s, stamp=now.stamp)

    def _do(self, action: Action, now: _Moment) -> str:
        """hold, resume, rebaseline, restore, note; what the event says."""
        if action.name == "hold":
            self._hold.until_s, self._hold.by = now.time_s + (action.for_s or 0.0), action.by
            self._state = "held"
            return wording.held_text(now.stamp + (action.for_s or 0.0), action.by)
        if action.name == "resume":
            return self._resume(action.by)
        if action.name == "note":
            return action.text
        return self._change_baseline(action, now)

    def _resume(self, by: str) -> str:
        if self._hold.until_s is None:
            raise ActionRefused("the loop is not held")
        self._hold.until_s = None
        self._state = self._open_state()
        return f"resumed by {by}"

    def _change_baseline(self, action: Action, now: _Moment) -> str:
        if action.name == "restore":
            self._knowledge.restore(action.baseline or "")
            text = f"baseline {action.baseline} is in force again"
        else:
            self._knowledge.learn_anew(action)
            text = f"a new baseline is learnt, because: {action.because}"
        self._book.withdraw(("plant_shift", "plant_drift", "cannot_judge"), time_s=now.time_s, stamp=now.stamp)
        if self._state in ("learning", "watching"):
            self._state = self._open_state()
        return text

    def _end_what_ends(self, now: _Moment) -> None:
        self._book.end_shelvings(time_s=now.time_s, stamp=now.stamp)
        if self._hold.ended(now.time_s):
            ending = Action("resume", by=self._hold.by)
            text = "the hold has ended by itself"
            self._actions.append(action_event(ending, text, time_s=now.time_s, stamp=now.stamp))

    def _shift_clock(self, delta_s: float) -> None:
        """The device restarted: its clock jumped by `delta_s`."""
        self._book.shift(delta_s)
        self._hold.shift(delta_s)
        if self._last_report_s is not None:
            self._last_report_s += delta_s

    def _say(self, now: _Moment, *, due: bool = False) -> Report:
        transitions = (*self._actions, *self._book.take_transitions())
        self._actions = []
        last = self._last_report_s
        due = due or last is None or now.time_s - last >= self.settings.publish_every_s
        if self.report is not None and not due and not transitions and self.report.state == self._state:
            return self._repeat(self.report, now)
        self._last_report_s = now.time_s if due else last
        self._judge_health(now)
        self.report = self._describe(now, due=due, transitions=transitions)
        return self.report

    def _describe(self, now: _Moment, *, due: bool, transitions: tuple[Transition, ...]) -> Report:
        return Report(
            loop=self.settings.name, time_s=now.time_s, stamp=now.stamp, samples=self._knowledge.samples,
            state=self._state, health=self._health[0], since=self._health_since or now.stamp, reason=self._health[1],
            due=due, quantities=self._knowledge.quantities(), drift=self._knowledge.drift(), transitions=transitions,
            alarms=self._book.active(),
        )  # fmt: skip

    def _repeat(self, last: Report, now: _Moment) -> Report:
        """Nothing to say between two publications: the last report at the present time."""
        samples = self._knowledge.samples
        self.report = replace(
            last, time_s=now.time_s, stamp=now.stamp, samples=samples, due=False, transitions=()
        )
        return self.report

    def _judge_health(self, now: _Moment) -> None:
        alarms, unchanged = self._book.active(), self._knowledge.unchanged
        health, reason = health_of(self._state, alarms, detail=self._detail(now), unchanged=unchanged)
        shelved = [wording.shelved_text(n, now.stamp + end - now.time_s) for n, _, end in self._book.shelved()]
        if health != self._health[0] or self._health_since is None:
            self._health_since = now.stamp
        self._health = (health, "; ".join((reason, *shelved)))

    def _detail(self, now: _Moment) -> str:
        """What the state itself has to say."""
        if self._state == "learning":
            return self._knowledge.progress
        if self._state == "held" and self._hold.until_s is not None:
            return wording.held_text(now.stamp + self._hold.until_s - now.time_s, self._hold.by)
        return wording.RESTARTED if self._state == "waiting" and self._restarted else ""


def identity_of(settings: LoopSettings) -> list[Any]:
    """What a state must agree in: signals, period and model."""
    model = settings.model
    return [
        *settings.inputs, settings.output, settings.period_s,
        model.structure, model.order, model.integrating, *model.dead_time_s,
    ]  # fmt: skip


def _runs(active: Mask) -> list[tuple[int, int]]:
    """First and last-plus-one of every stretch of true."""
    edges = np.flatnonzero(np.diff(np.concatenate(([False], active, [False])).astype(np.int8)))
    return [(int(a), int(b)) for a, b in zip(edges[::2], edges[1::2], strict=True)]
