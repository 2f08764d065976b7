"""Readings into ticks: to which tick each reading belongs, when a tick is final, and what its row says.

A tick is final when every signal has a reading at a later tick, or any signal one at least `FINAL_AFTER` ticks later:
an input that changes rarely does not hold the loop back for ever. All of it follows from the readings alone. The first
`DECIDING_TICKS` ticks on which all signals are known decide once which signals are fast and averaged (oversampling.py);
rows wait for that.
"""

from __future__ import annotations

import math
from collections import Counter
from typing import Any

from rtid import settings
from rtid.intake.cell import Cell
from rtid.intake.clock import Values, from_pairs, to_pairs
from rtid.intake.oversampling import window_shift

FINAL_AFTER = 4  # one more than the longest hole that is bridged
DECIDING_TICKS = 8
CROWD = 4096  # so many readings on the deciding ticks decide at once: memory stays bounded
UNSEEN = -(2.0**60)  # position of a signal that was never read

Message = tuple[float, Values]  # position in ticks, values by column
Row = tuple[list[float], float]  # values by column, offset of the output from the tick in periods


class Ticks:
    """The open ticks of one loop. `rejected` counts what is refused: `backwards` and `late`."""

    def __init__(self, loop: settings.Loop, rejected: Counter[str]) -> None:
        self._count = len(loop.signals)
        self._output = loop.signals.index(loop.output)
        inputs = {loop.signals.index(name): 0.0 for name in loop.inputs}
        self._windows = {**inputs, self._output: -0.5}  # where a mean over one period begins, in ticks from the tick
        self._rejected = rejected
        self.reset()

    def reset(self) -> None:
        """Forget everything: a new anchor."""
        self._last = [UNSEEN] * self._count  # position of the last accepted reading of each signal
        self._held = [math.nan] * self._count  # last value of each signal on the closed ticks; the output stays NaN
        self._cells: dict[int, Cell] = {}
        self._waiting: dict[int, list[Message]] = {}  # before the decision: readings by tick
        self._next = 1 - FINAL_AFTER  # every tick before is closed
        self._unseen = set(range(self._count))
        self._since = self._next  # the first tick on which every signal is known
        self._decided = False
        self._deciding_from = self._next
        self._set_fast({})

    def take(self, position: float, values: Values) -> None:
        """Put one reading at `position` (in ticks) on its tick, without the signals that run backwards."""
        last = self._last
        for column in values:
            if position < last[column]:
                self._rejected["backwards"] += 1
                values = {column: value for column, value in values.items() if position >= last[column]}
                break
        if not values:
            return
        tick = math.floor(position + 0.5)
        if tick < self._next:
            self._rejected["late"] += 1
            return
        for column in values:
            last[column] = position
        if self._decided:
            self._put(position, tick, values)
        else:
            self._wait(position, tick, values)

    def due(self) -> range:
        """The ticks that are final and not closed yet, to be closed in this order."""
        newest = math.floor(max(self._last) + 0.5)
        final = max(math.floor(min(self._last) + 0.5) - 1, newest - FINAL_AFTER)
        if not self._decided:
            final = self._before_decision(final)
        return range(self._next, final - self._lag + 1)

    def due_early(self) -> range:
        """All ticks that have any reading, final or not. Before the decision they are taken as not oversampled."""
        self._release(max(self._waiting, default=0))
        end = max(self._cells, default=self._next - 1) + 1
        self._deciding_from = max(self._next, end)
        return range(self._next, end)

    def skip_to(self, position: float) -> None:
        """The time line leaps to `position`, after all that was open has been closed."""
        self._next = max(self._next, math.floor(position + 0.5) - FINAL_AFTER + 1)
        self._deciding_from = self._next

    def close(self, tick: int) -> Row | None:
        """Row `tick`, its output NaN where none was read; None before every signal is known. Closes it for good."""
        self._next = tick + 1
        held = self._held
        cell = self._cells.pop(tick, None)
        if cell is None:
            row, offset = held.copy(), 0.0
        else:
            for column, value in cell.inputs.items():
                held[column] = value
            row = held.copy()
            row[self._output] = cell.output
            offset = self._average(row, cell) if cell.means else 0.0
        return None if tick < self._since or self._unseen else (row, offset)

    def _average(self, row: list[float], cell: Cell) -> float:
        for column, mean in cell.means.items():
            row[column] = mean.value
        output = cell.means.get(self._output)
        return output.offset if output else 0.0

    def _put(self, position: float, tick: int, values: Values) -> None:
        cell = self._cells.get(tick)
        if cell is None:
            cell = self._cells[tick] = Cell()
        for column, value in values.items():
            if column in self._fast:
                self._put_fast(column, position, value)
            elif column == self._output:
                cell.add_output(value, position - tick)
            else:
                cell.inputs[column] = value

    def _put_fast(self, column: int, position: float, value: float) -> None:
        """On the tick in whose window the reading falls. When that is closed already, an input holds on from there."""
        tick = math.floor(position - self._fast[column])
        if tick >= self._next:
            cell = self._cells.setdefault(tick, Cell())
            cell.add_mean(column, value, position - tick)
            if column != self._output:
                cell.inputs[column] = value
        elif column != self._output:
            self._held[column] = value
        else:
            self._rejected["late"] += 1

    def _wait(self, position: float, tick: int, values: Values) -> None:
        if not self._unseen.isdisjoint(values):
            self._unseen.difference_update(values)
            self._since = max(self._since, tick)
        self._waiting.setdefault(tick, []).append((position, values))

    def _before_decision(self, final: int) -> int:
        """The last tick that may be closed now: ticks that make no row, or all final ones once it is decided."""
        last_deciding = max(self._since, self._deciding_from) + DECIDING_TICKS - 1
        crowded = sum(map(len, self._waiting.values())) > CROWD
        if self._unseen:
            self._release(max(self._waiting) if crowded else final)
        elif final >= last_deciding or crowded:
            self._decide(last_deciding)
        else:
            final = min(final, self._since - 1)
            self._release(final)
        return final

    def _decide(self, last_deciding: int) -> None:
        fast = {}
        for column, begin in self._windows.items():
            shift = window_shift(self._positions(column, last_deciding), begin)
            if shift is not None:
                fast[column] = begin + shift
        self._set_fast(fast)
        self._decided = True
        self._release(max(self._waiting))

    def _set_fast(self, fast: dict[int, float]) -> None:
        self._fast = fast  # column -> where its window begins, in ticks from the tick
        self._lag = 1 if fast else 0  # the end of a window may be nearer to the next tick

    def _positions(self, column: int, last_tick: int) -> list[float]:
        ticks = sorted(tick for tick in self._waiting if tick <= last_tick)
        return [position for tick in ticks for position, values in self._waiting[tick] if column in values]

    def _release(self, last_tick: int) -> None:
        """Put the waiting readings up to `last_tick` on their ticks."""
        for tick in sorted(tick for tick in self._waiting if tick <= last_tick):
            for position, values in self._waiting.pop(tick):
                self._put(position, tick, values)

    def to_state(self) -> dict[str, Any]:
        return {
            "last": list(self._last),
            "held": [None if math.isnan(value) else value for value in self._held],
            "cells": [[tick, cell.to_state()] for tick, cell in self._cells.items()],
            "waiting": [
                [tick, [[position, to_pairs(values)] for position, values in messages]]
                for tick, messages in self._waiting.items()
            ],
            "next": self._next,
            "since": self._since,
            "deciding_from": self._deciding_from,
            "decided": self._decided,
            "fast": to_pairs(self._fast),
        }

    def from_state(self, state: dict[str, Any]) -> None:
        self._last = list(state["last"])
        self._held = [math.nan if value is None else value for value in state["held"]]
        self._cells = {tick: Cell.from_state(cell) for tick, cell in state["cells"]}
        self._waiting = {
            tick: [(position, from_pairs(pairs)) for position, pairs in messages] for tick, messages in state["waiting"]
        }
        self._next, self._since = state["next"], state["since"]
        self._deciding_from, self._decided = state["deciding_from"], state["decided"]
        self._unseen = {column for column, position in enumerate(self._last) if position == UNSEEN}
        self._set_fast(from_pairs(state["fast"]))
