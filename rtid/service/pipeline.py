"""The one way through the house: readings become rows, rows become reports. Live service and replay both walk it."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence

from rtid import settings
from rtid.actions import Action
from rtid.intake.grid import Grid
from rtid.intake.reading import Reading
from rtid.loop import Loop
from rtid.report import Report
from rtid.rows import Rows


class Pipeline:
    """The grids and loops of one node; all reports go to `deliver`, in the order in which they came about.

    Those of one loop that came about at one time go together: when they are delivered there is nothing between the loop
    and its grid. `rows` counts the grid rows over all loops, `blocks` the blocks of each. `stamp` is a label in seconds
    since 1970. Not safe for threads: one worker owns it.
    """

    def __init__(self, told: Mapping[str, settings.Loop], deliver: Callable[[Sequence[Report]], None]) -> None:
        self.loops: dict[str, Loop] = {}
        self.grids: dict[str, Grid] = {}
        self.rows = 0
        self.blocks: dict[str, int] = {}
        self._deliver = deliver
        self._wanted: dict[str, frozenset[str]] = {}
        for loop in told.values():
            self.put(Loop(loop), Grid(loop))

    def put(self, loop: Loop, grid: Grid) -> None:
        """From now on this is the loop of its name."""
        name = loop.settings.name
        self.loops[name], self.grids[name] = loop, grid
        self._wanted[name] = frozenset(loop.settings.signals)
        self.blocks.setdefault(name, 0)

    def drop(self, name: str) -> None:
        del self.loops[name], self.grids[name], self._wanted[name], self.blocks[name]

    def feed(self, reading: Reading, stamp: float) -> list[str]:
        """Hand a reading to the loops that use it; their names."""
        names = [name for name, wanted in self._wanted.items() if not wanted.isdisjoint(reading.values)]
        for name in names:
            self._advance(name, self.grids[name].feed(reading, stamp))
        return names

    def flush(self, name: str, stamp: float) -> None:
        """Close the open block of a loop early."""
        self._advance(name, self.grids[name].flush(stamp))

    def silence(self, name: str, *, seconds: float, stamp: float) -> None:
        """Tell a loop that no reading came for so long."""
        self.flush(name, stamp)
        report = self.loops[name].silence(seconds, stamp)
        if report is not None:
            self._deliver((report,))

    def act(self, name: str, action: Action, *, silent_s: float, stamp: float) -> Report:
        """A person's action on a loop, `silent_s` after its last reading. Raises ActionRefused."""
        report = self.loops[name].act(action, stamp, silent_s=silent_s)
        self._deliver((report,))
        return report

    def report(self, name: str, stamp: float) -> Report:
        """The latest report of a loop; before its first reading one that says so, and that is due."""
        return self.loops[name].report or Report(
            loop=name,
            time_s=stamp,
            stamp=stamp,
            samples=0,
            state="waiting",
            health="function_check",
            since=stamp,
            reason="waiting: no reading yet",
            due=True,
        )

    def _advance(self, name: str, blocks: Iterable[Rows]) -> None:
        reports = []
        for rows in blocks:
            self.rows += len(rows.values)
            self.blocks[name] += 1
            reports.append(self.loops[name].advance(rows))
        if reports:
            self._deliver(reports)
