"""What one tick has heard, boiled down to a fixed size however many readings fall on it."""

from __future__ import annotations

import math
from typing import Any

from rtid.intake.clock import Values, from_pairs, to_pairs


class Mean:
    """Mean of readings and of their offsets from the tick (in periods)."""

    __slots__ = ("_count", "_offsets", "_total")

    def __init__(self, total: float = 0.0, offsets: float = 0.0, count: int = 0) -> None:
        self._total = total
        self._offsets = offsets
        self._count = count

    def add(self, value: float, offset: float) -> None:
        self._total += value
        self._offsets += offset
        self._count += 1

    @property
    def value(self) -> float:
        return self._total / self._count

    @property
    def offset(self) -> float:
        return self._offsets / self._count

    def to_state(self) -> list[float]:
        return [self._total, self._offsets, self._count]


class Cell:
    """One tick: the last reading of each input, the output nearest to the tick, the means of the fast signals."""

    __slots__ = ("_distance", "inputs", "means", "output")

    def __init__(self) -> None:
        self.inputs: Values = {}
        self.output = math.nan  # NaN: no reading
        self._distance = math.inf
        self.means: dict[int, Mean] = {}

    def add_output(self, value: float, offset: float) -> None:
        distance = abs(offset)
        if distance < self._distance:
            self.output = value
            self._distance = distance

    def add_mean(self, column: int, value: float, offset: float) -> None:
        self.means.setdefault(column, Mean()).add(value, offset)

    def to_state(self) -> dict[str, Any]:
        heard = None if math.isnan(self.output) else [self.output, self._distance]
        means = [[column, *mean.to_state()] for column, mean in self.means.items()]
        return {"inputs": to_pairs(self.inputs), "output": heard, "means": means}

    @classmethod
    def from_state(cls, state: dict[str, Any]) -> Cell:
        cell = cls()
        cell.inputs = from_pairs(state["inputs"])
        cell.output, cell._distance = state["output"] or (math.nan, math.inf)
        cell.means = {column: Mean(*sums) for column, *sums in state["means"]}
        return cell
