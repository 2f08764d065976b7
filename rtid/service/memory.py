"""What the service keeps on the disk of all its loops, and in which order: what is told was saved before.

An event gets its number, then the state that knows of it is saved with the event in it, then the event list is
written, then the world is told. A kill between any two of these loses nothing and repeats nothing. For a flood of
alarms of the data only the event list is written: flash memory wears out.
"""

from __future__ import annotations

import time
from collections import defaultdict
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from rtid import settings
from rtid.errors import InputOutputError
from rtid.intake.grid import Grid
from rtid.loop import Loop
from rtid.publish.events import Event, EventLog
from rtid.report import Transition
from rtid.service.loop_memory import LoopMemory, Subject

SAVE_EVERY_S = 300.0  # flash memory wears out
RETRY_S = 10.0  # while the disk refuses
FLOOD_S = 60.0  # between two saves for alarms of the data, which come in floods from a bad line

# What these say is all in the event list; a state that does not know of them yet catches up from there.
OF_THE_DATA = frozenset({
    "data_gap", "data_stale", "out_of_range", "frozen_signal", "saturated", "outliers", "timing",
})  # fmt: skip

_EVENTS = ""  # the event list among the names of loops


@dataclass(frozen=True, slots=True)
class Remembered:
    """A loop that goes on, with what is to be told about that."""

    loop: Loop
    grid: Grid
    news: tuple[Transition, ...]


class Memory:
    """All loops of one node on the disk of `folder`. Never raises for a disk that refuses: `failure` says so.

    One worker owns it. `stamp` is a label in seconds since 1970, `now` the monotonic clock.
    """

    def __init__(self, folder: Path, node: str) -> None:
        self._folder = folder
        self._node = node
        self._loops: dict[str, LoopMemory] = {}
        self._due: dict[str, float] = {}
        self._saved_at: dict[str, float] = defaultdict(lambda: -FLOOD_S)
        self._failures: dict[str, str] = {}
        self._retry_at = 0.0
        self.events = EventLog(folder / "events.jsonl")

    @property
    def failure(self) -> str:
        """Why something is not on the disk; empty when all is."""
        return next(iter(self._failures.values()), "")

    def restore(self, told: Iterable[settings.Loop], stamp: float) -> list[Remembered]:
        """These loops as they were, caught up with the event list; its missing events are written."""
        fresh = {loop.name: LoopMemory(self._folder, loop) for loop in told}
        for memory in fresh.values():
            memory.restore()
        pending = [event for memory in fresh.values() for event in memory.pending]
        self.events.recover(pending, last=max((memory.sequence for memory in fresh.values()), default=0))
        self._write_events()
        newer = self.events.after(min((memory.sequence for memory in fresh.values()), default=0))
        self._loops |= fresh
        self._due |= dict.fromkeys(fresh, 0.0)  # at once: a start shows whether the disk takes it
        remembered = []
        for name, memory in fresh.items():
            own = [event for event in newer if event["loop"] == name and event["sequence"] > memory.sequence]
            news = memory.catch_up(own, stamp)
            remembered.append(Remembered(memory.loop, memory.grid, tuple(news)))
        return remembered

    def change(self, told: settings.Loop, stamp: float) -> Remembered:
        """A loop under other settings; it goes on unless it is another plant now."""
        before, after = self._loops[told.name], LoopMemory(self._folder, told)
        self._save(told.name)
        news = after.take_over(before, stamp)
        self._loops[told.name] = after
        self._due[told.name] = 0.0
        return Remembered(after.loop, after.grid, tuple(news))

    def drop(self, loop: str) -> None:
        """Save it for the day on which it comes back, and watch it no longer."""
        self._save(loop)
        del self._loops[loop], self._due[loop]
        self._failures.pop(loop, None)

    def keep(self, loop: str, transitions: Sequence[Transition]) -> list[Event]:
        """The events of these, on the disk with the state that led to them. Only then may they be told."""
        events = [self.events.number(transition, node=self._node, loop=loop) for transition in transitions]
        if events and loop in self._loops:
            for transition, event in zip(transitions, events, strict=True):
                self._loops[loop].note(transition, event)
            if time.monotonic() - self._saved_at[loop] >= FLOOD_S or not _of_the_data(transitions):
                self._save(loop)
        if events:
            self._write_events()
        return events

    def told(self, loop: str) -> Mapping[Subject, Event | None]:
        """What the broker is to keep of each alarm of this loop; None: nothing."""
        return self._loops[loop].told

    def tend(self, now: float) -> None:
        """Save what is due, and try again what the disk refused."""
        retry = bool(self._failures) and now >= self._retry_at
        for place, (name, memory) in enumerate(self._loops.items(), 1):
            if now >= self._due[name] and not memory.is_saved:
                self._save(name)
                share = place / len(self._loops) if self._due[name] == 0.0 else 1.0
                self._due[name] = now + share * SAVE_EVERY_S
            elif retry and name in self._failures:
                self._save(name)
        if retry:
            self._write_events()
            self._retry_at = now + RETRY_S

    def save_all(self) -> None:
        """All that is not on the disk."""
        for name in self._loops:
            self._save(name)
        self._write_events()

    def _save(self, loop: str) -> None:
        try:
            self._loops[loop].save(self.events.sequence, self.events.unwritten)
        except InputOutputError as error:
            self._fail(loop, error)
        else:
            self._failures.pop(loop, None)
            self._saved_at[loop] = time.monotonic()

    def _write_events(self) -> None:
        try:
            self.events.write()
        except InputOutputError as error:
            self._fail(_EVENTS, error)
        else:
            self._failures.pop(_EVENTS, None)

    def _fail(self, what: str, error: InputOutputError) -> None:
        if not self._failures:
            self._retry_at = time.monotonic() + RETRY_S
        self._failures[what] = str(error)


def _of_the_data(transitions: Iterable[Transition]) -> bool:
    """Nothing but alarms of the data coming and going by themselves."""
    return all(t.alarm in OF_THE_DATA and t.transition in ("active", "updated", "cleared") for t in transitions)
