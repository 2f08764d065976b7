"""Rows into blocks: boundaries where k mod m = 0, short holes bridged, long ones a gap that closes the block early."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from rtid import settings
from rtid.intake.clock import TimeLine
from rtid.rows import Rows

LONGEST_BRIDGE = 3  # ticks without output between two with output that still make rows


class Blocks:
    """The open block of one loop. Rows come with rising tick numbers; `line` gives their times."""

    def __init__(self, loop: settings.Loop, line: TimeLine) -> None:
        self._size = loop.block_rows
        self._period = loop.period_s
        self._output = loop.signals.index(loop.output)
        self._line = line
        self._shift = 0.0  # of the last block that had an output, in periods
        self.begin(restart=False)

    def begin(self, *, restart: bool) -> None:
        """Tick numbers start anew; with `restart` the next block says so. Nothing may be open."""
        self._rows: list[list[float]] = []
        self._offsets: list[float] = []
        self._first = 0
        self._last: int | None = None  # last tick that had an output
        self._missing: list[list[float]] = []  # rows of the ticks since, without output, while they may be bridged
        self._gap_s = 0.0
        self._restart = restart

    def add(self, tick: int, row: list[float], *, offset: float, stamp: float) -> list[Rows]:
        """Row `tick`, its output NaN when it is missing. Returns the blocks that it closes."""
        if math.isnan(row[self._output]):
            return self._miss(tick, row, stamp)
        last = tick - 1 if self._last is None else self._last
        self._last = tick
        if tick - last - 1 > LONGEST_BRIDGE:
            self._missing.clear()
            self._gap_s = (tick - last) * self._period
        done = self._bridge(last + 1, stamp) if self._missing else []
        self._offsets.append(offset)
        return done + self._push(tick, row, stamp)

    def close(self, stamp: float) -> list[Rows]:
        """The open block as it is, if there is one."""
        if not self._rows:
            return []
        if self._offsets:
            self._shift = sum(self._offsets) / len(self._offsets)
        block = Rows(
            first=self._first,
            time_s=self._line.time_of(self._first),
            values=np.array(self._rows, dtype=np.float64),
            stamp=stamp,
            gap_s=self._gap_s,
            restart=self._restart,
            output_shift_s=self._shift * self._period,
        )
        self._rows, self._offsets = [], []
        self._gap_s, self._restart = 0.0, False
        return [block]

    def _miss(self, tick: int, row: list[float], stamp: float) -> list[Rows]:
        if self._last is None:
            return []
        if tick - self._last <= LONGEST_BRIDGE:
            self._missing.append(row)
            return []
        self._missing.clear()
        return self.close(stamp)

    def _bridge(self, tick: int, stamp: float) -> list[Rows]:
        done = []
        for missing, row in enumerate(self._missing, tick):
            done += self._push(missing, row, stamp)
        self._missing.clear()
        return done

    def _push(self, tick: int, row: list[float], stamp: float) -> list[Rows]:
        if not self._rows:
            self._first = tick
        self._rows.append(row)
        return self.close(stamp) if (tick + 1) % self._size == 0 else []

    def to_state(self) -> dict[str, Any]:
        return {
            "first": self._first,
            "rows": [self._without_nan(row) for row in self._rows],
            "offsets": list(self._offsets),
            "last": self._last,
            "missing": [self._without_nan(row) for row in self._missing],
            "gap_s": self._gap_s,
            "restart": self._restart,
            "shift": self._shift,
        }

    def from_state(self, state: dict[str, Any]) -> None:
        self._first, self._last = state["first"], state["last"]
        self._rows = [self._with_nan(row) for row in state["rows"]]
        self._offsets = list(state["offsets"])
        self._missing = [self._with_nan(row) for row in state["missing"]]
        self._gap_s, self._restart, self._shift = state["gap_s"], state["restart"], state["shift"]

    @staticmethod
    def _without_nan(row: list[float]) -> list[float | None]:
        return [None if math.isnan(value) else value for value in row]

    @staticmethod
    def _with_nan(row: list[float | None]) -> list[float]:
        return [math.nan if value is None else value for value in row]
