"""What one tick has heard, boiled down to a fixed size however many readings fall on it."""

from __future__ import annotations

import math
from typing import Any

from rtid.intake.clock import Values, from_pairs, to_pairs


class Mean:
    """Running mean of readings and of their offsets from the tick, in periods. Exact for equal readings."""

    __slots__ = ("_count", "offset", "value")

    def __init__(self, value: float = 0.0, offset: float = 0.0, count: int = 0) -> None:
        self.value = value
        self.offset = offset
        self._count = count

    def add(self, value: float, offset: float) -> None:
        self._count += 1
        self.value += (value - self.value) / self._count
        self.offset += (offset - self.offset) / self._count

    def to_state(self) -> list[float]:
        return [self.value, self.offset, self._count]


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
        cell.means = {column: Mean(*mean) for column, *mean in state["means"]}
        return cell
