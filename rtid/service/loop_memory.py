"""One loop with its grid, and what is on the disk of them: made at start from the state, or from the event list."""

from __future__ import annotations

import logging
from collections.abc import Sequence
from pathlib import Path
from typing import Any

from rtid import settings
from rtid.actions import ActionRefused
from rtid.intake.grid import Grid
from rtid.loop import Loop, identity_of
from rtid.publish.events import Event
from rtid.publish.messages import transition_of
from rtid.report import Transition
from rtid.service.baseline_store import BaselineStore
from rtid.service.state_store import StateStore

ANEW = "learns_anew"  # the action of the event that ends whatever was known of a plant

log = logging.getLogger("rtid.service")

Subject = tuple[str, str | None]  # alarm and signal


class LoopMemory:
    """`restore` and `catch_up`, or `take_over`; afterwards `note` every event and `save`.

    `sequence` is the number of the last event that the state knows, `pending` the events that may not have reached the
    list when it was saved, `told` the message that is kept of each alarm ever told; None: emptied.
    """

    def __init__(self, folder: Path, told: settings.Loop) -> None:
        self._settings = told
        self._store = StateStore(folder / "loops", told.name)
        self._baselines = BaselineStore(folder / "baselines", told.name, identity_of(told))
        self._saved: object = self  # the report of the last save
        self.loop = Loop(told)
        self.grid = Grid(told)
        self.sequence = 0
        self.pending: list[Event] = []
        self.told: dict[Subject, Event | None] = {}
        self._refusal = ""  # why the state is not gone on from

    def restore(self) -> None:
        """Go on from the newest state that verifies."""
        try:
            if self._store.restore(self._take) is None:
                self.loop.skip_baselines(self._baselines.last_number)
        except ActionRefused as refusal:
            self._refusal = str(refusal)

    def take_over(self, before: LoopMemory, stamp: float) -> list[Transition]:
        """Go on from the same loop under other settings; what is to be told about a plant that ended."""
        try:
            self._take(before.body(before.sequence, before.pending))
        except ActionRefused as refusal:
            self._store.keep_old(self._store.present)
            self._refusal = str(refusal)
            return self._begin_anew([], stamp)
        return []

    def catch_up(self, events: Sequence[Event], stamp: float) -> list[Transition]:
        """Take in the events of this loop that are newer than its state; what is to be told about a plant that ended.

        Where the state is that of another plant the loop learns anew.
        """
        if self._refusal:
            return self._begin_anew(events, stamp)
        self._recall_all(events)
        if events or self.loop.report is not None:
            self.loop.restarted(stamp)
        return []

    def note(self, transition: Transition, event: Event) -> None:
        """Remember what the broker is told of an alarm."""
        if transition.alarm is not None:
            self.told[transition.alarm, transition.signal] = event if transition.retain else None

    @property
    def is_saved(self) -> bool:
        """Nothing has come since the last `save`."""
        return self._saved is self.loop.report

    def save(self, sequence: int, pending: Sequence[Event]) -> None:
        """Baselines first, then the state. Raises InputOutputError."""
        self.sequence, self.pending = sequence, list(pending)
        for accepted in self.loop.baselines:
            self._baselines.keep(accepted)
        self._store.save(self.body(sequence, pending))
        self._saved = self.loop.report

    def body(self, sequence: int, pending: Sequence[Event]) -> dict[str, Any]:
        return {
            "loop": self.loop.to_state(),
            "grid": self.grid.to_state(),
            "sequence": sequence,
            "pending": list(pending),
            "told": [[alarm, signal, event] for (alarm, signal), event in self.told.items()],
        }

    def _take(self, body: dict[str, Any]) -> bool:
        told = {(alarm, signal): event for alarm, signal, event in body["told"]}
        sequence, pending = int(body["sequence"]), list(body["pending"])
        try:
            loop, grid = Loop.from_state(self._settings, body["loop"]), Grid(self._settings)
        except ActionRefused:
            self.sequence, self.pending, self.told = sequence, pending, told
            raise
        grid.from_state(body["grid"])
        self.loop, self.grid = loop, grid
        self.sequence, self.pending, self.told = sequence, pending, told
        return True

    def _begin_anew(self, events: Sequence[Event], stamp: float) -> list[Transition]:
        self.loop.skip_baselines(self._baselines.last_number)
        self.told |= {(event["alarm"], event["signal"]): event for event in events if "alarm" in event}
        void = [event for event in self.told.values() if event is not None and event["transition"] != "cleared"]
        self.told = dict.fromkeys(self.told)
        anew = Transition(None, None, "low", self._refusal, stamp, stamp, action=ANEW)
        return [*(_voided(transition_of(event), stamp) for event in void), anew]

    def _recall_all(self, events: Sequence[Event]) -> None:
        last_break = max((i for i, event in enumerate(events) if event.get("action") == ANEW), default=-1)
        for event in events[last_break + 1 :]:
            try:
                self._recall(transition_of(event), event)
            except (KeyError, TypeError, ValueError) as error:
                log.warning("%s: event %s passed over (%s)", self._settings.name, event["sequence"], error)
        if events:
            self._say_recalled(len(events) - last_break - 1)
            standing = self.loop.open_alarms
            self.told = {subject: told if subject in standing else None for subject, told in self.told.items()}

    def _recall(self, event: Transition, told: Event) -> None:
        identity = (event.detail or {}).get("baseline")
        if identity is not None:
            known = {accepted.identity: accepted for accepted in self.loop.baselines}
            accepted = known.get(identity) or self._baselines.get(identity)
            if accepted is None:
                return
            self.loop.recall(event, accepted)
        else:
            self.loop.recall(event)
        if event.alarm is not None:
            self.told[event.alarm, event.signal] = told

    def _say_recalled(self, count: int) -> None:
        has = f"baseline {self.loop.baseline}" if self.loop.baseline else "no baseline, it learns anew"
        log.log(
            logging.INFO if self.loop.baseline else logging.WARNING,
            "%s: the state is older than the event list: %d events are taken from there (%s)",
            self._settings.name, count, has,
        )  # fmt: skip


def _voided(event: Transition, stamp: float) -> Transition:
    return Transition(
        alarm=event.alarm, transition="cleared", priority=event.priority, signal=event.signal, time_s=stamp,
        stamp=stamp, text="void: it stood for a plant that this loop no longer watches", retain=False,
    )  # fmt: skip
