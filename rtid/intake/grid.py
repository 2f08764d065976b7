"""The grid of one loop: readings in, blocks of rows out. Tick k stands at anchor + k·period.

The same readings give the same rows, whatever the computer's clock says. What is refused is counted by kind, once per
reading: `not_finite`, `time_jump` (a jump that the next reading did not confirm), `backwards` (a signal older than its
last reading), `late` (its tick is closed already).
"""

from __future__ import annotations

from collections import Counter
from collections.abc import Mapping
from typing import Any

from rtid import settings
from rtid.intake.blocks import Blocks
from rtid.intake.clock import TimeLine, Values
from rtid.intake.reading import Reading
from rtid.intake.ticks import Ticks
from rtid.rows import Rows

BEYOND = 1e150  # the square of anything beyond is no finite float64


class Grid:
    """`feed` every reading in order of arrival; `flush` closes early what is open. Not safe for threads.

    `Rows.output_shift_s`: an averaged output stands δ later than its tick, so the response shows δ earlier in the rows
    and the dead time in the rows is L - δ. The true one is L = found + output_shift_s. The rows' stamp is the label
    that came with the reading which closed them.
    """

    def __init__(self, loop: settings.Loop) -> None:
        self._signals = tuple(enumerate(loop.signals))
        self._period = loop.period_s
        self._counts: Counter[str] = Counter()
        self._stamp = 0.0  # of the last reading that counted
        self._line = TimeLine(loop.period_s)
        self._ticks = Ticks(loop, self._counts)
        self._blocks = Blocks(loop, self._line)

    @property
    def rejected(self) -> dict[str, int]:
        """How many readings were refused, by kind. Not part of the state."""
        return self._counts

    def feed(self, reading: Reading, stamp: float) -> list[Rows]:
        """The blocks that this reading closes, oldest first. A reading without any signal of the loop is ignored."""
        values = self._own(reading.values)
        return self._admit(reading.time, values, stamp) if values else []

    def flush(self, stamp: float) -> list[Rows]:
        """Close early what is there, also the ticks that are not final: stop, end of data, staleness."""
        return self._settle(self._ticks.due_early(), stamp) + self._blocks.close(stamp)

    def _own(self, given: Mapping[str, float]) -> Values:
        """The finite values of the loop's own signals."""
        values = {column: given[name] for column, name in self._signals if name in given}
        for value in values.values():
            if not -BEYOND < value < BEYOND:
                self._counts["not_finite"] += 1
                return {column: finite for column, finite in values.items() if -BEYOND < finite < BEYOND}
        return values

    def _admit(self, time: float, values: Values, stamp: float) -> list[Rows]:
        line = self._line
        if line.follow(time):
            return self._take(time, values, stamp)
        if not -BEYOND < time < BEYOND:
            self._counts["not_finite"] += 1
            return []
        if not line.begun:
            line.begin(time)
            return self._take(time, values, stamp)
        if line.candidate is None:
            line.candidate = (time, values)
            return []
        return self._judge_candidate(time, values, stamp)

    def _judge_candidate(self, time: float, values: Values, stamp: float) -> list[Rows]:
        """The reading after a jump: it confirms the jump, or the jump is refused and it is looked at on its own."""
        candidate, self._line.candidate = self._line.candidate, None
        if candidate is None or not self._line.confirms(time, candidate):
            self._counts["time_jump"] += 1
            return self._admit(time, values, stamp)
        done = self.flush(self._stamp)
        self._jump_to(candidate[0])
        done += self._take(*candidate, stamp)
        return done + self._admit(time, values, stamp)

    def _jump_to(self, time: float) -> None:
        if self._line.is_restart(time):
            self._line.begin(time)
            self._ticks.reset()
            self._blocks.begin(restart=True)
        else:
            self._line.leap(time)
            self._ticks.skip_to(self._line.position(time))

    def _take(self, time: float, values: Values, stamp: float) -> list[Rows]:
        self._stamp = stamp
        self._ticks.take(self._line.position(time), values)
        return self._settle(self._ticks.due(), stamp)

    def _settle(self, ticks: range, stamp: float) -> list[Rows]:
        done: list[Rows] = []
        for tick in ticks:
            row = self._ticks.close(tick)
            if row is not None:
                done += self._blocks.add(tick, row[0], offset=row[1], stamp=stamp)
        return done

    def to_state(self) -> dict[str, Any]:
        """All that the next rows depend on, as plain JSON values with every digit."""
        return {
            "signals": [name for _, name in self._signals],
            "period_s": self._period,
            "stamp": self._stamp,
            "line": self._line.to_state(),
            "ticks": self._ticks.to_state(),
            "blocks": self._blocks.to_state(),
        }

    def from_state(self, state: dict[str, Any]) -> None:
        """Go on from `to_state()`. With other signals or another period nothing is taken over: the grid restarts."""
        if state["signals"] != [name for _, name in self._signals] or state["period_s"] != self._period:
            self._blocks.begin(restart=True)
            return
        self._stamp = state["stamp"]
        self._line.from_state(state["line"])
        self._ticks.from_state(state["ticks"])
        self._blocks.from_state(state["blocks"])
