"""Which times count: the time line of one loop, its anchor, and the two jumps that only a second reading confirms.

Data time alone is looked at, never the computer's clock. A reading more than `JUMP_PERIODS` away from the newest
accepted time waits as a candidate. The next reading of the loop confirms it when it stands within as many periods
after it; then the candidate is a leap (forward) or a restart of the device (back).
"""

from __future__ import annotations

import math
from typing import Any

JUMP_PERIODS = 10
EXACT_TICKS = 2.0**50  # up to here a float64 tells the quarters of a tick apart

Values = dict[int, float]  # column of the row -> value
Candidate = tuple[float, Values]


def to_pairs(values: Values) -> list[list[float]]:
    """JSON has no integer keys."""
    return [[column, value] for column, value in values.items()]


def from_pairs(pairs: list[list[float]]) -> Values:
    return {int(column): value for column, value in pairs}


class TimeLine:
    """The accepted times of one loop since its anchor, in seconds of data time.

    `anchor` is the time of tick 0 (NaN before the first reading), `candidate` the reading that waits to be confirmed.
    """

    __slots__ = ("_newest", "_period", "_window", "anchor", "candidate")

    def __init__(self, period_s: float) -> None:
        self._period = period_s
        self._window = JUMP_PERIODS * period_s
        self._newest = math.nan
        self.anchor = math.nan
        self.candidate: Candidate | None = None

    @property
    def begun(self) -> bool:
        return not math.isnan(self.anchor)

    def begin(self, time: float) -> None:
        """Tick 0 is at `time`."""
        self.anchor = self._newest = time
        self.candidate = None

    def follow(self, time: float) -> bool:
        """Go on to `time`. False, and nothing is changed, when it is a jump or must judge a candidate first."""
        ahead = time - self._newest
        if self.candidate is not None or not -self._window <= ahead <= self._window:
            return False
        if ahead > 0.0:
            self._newest = time
        return True

    def leap(self, time: float) -> None:
        """Go on to `time`, however far ahead it is."""
        self._newest = time
        self.candidate = None

    def confirms(self, time: float, candidate: Candidate) -> bool:
        return 0.0 <= time - candidate[0] <= self._window

    def is_restart(self, time: float) -> bool:
        """A confirmed jump to `time` begins a new line: it goes back, or too far ahead for ticks to be counted."""
        return time < self._newest or self.position(time) > EXACT_TICKS

    def position(self, time: float) -> float:
        """`time` in ticks after the anchor; tick k is at position k."""
        return (time - self.anchor) / self._period

    def time_of(self, tick: int) -> float:
        return self.anchor + tick * self._period

    def to_state(self) -> dict[str, Any]:
        if not self.begun:
            return {"anchor": None}
        waiting = self.candidate and [self.candidate[0], to_pairs(self.candidate[1])]
        return {"anchor": self.anchor, "newest": self._newest, "candidate": waiting}

    def from_state(self, state: dict[str, Any]) -> None:
        if state["anchor"] is None:
            return
        self.anchor, self._newest = state["anchor"], state["newest"]
        waiting = state["candidate"]
        self.candidate = waiting and (waiting[0], from_pairs(waiting[1]))
