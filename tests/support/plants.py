"""Seeded scenarios: a simulated plant, what moves it, and the blocks of rows that a loop takes in.

Learning costs most of a scenario, so a loop that watches is made once for each plant and copied for every test.
"""

from __future__ import annotations

import copy
import functools
from collections.abc import Iterable, Iterator
from dataclasses import dataclass, field, replace
from typing import Any, Literal

import numpy as np
from numpy.typing import NDArray

from rtid import settings
from rtid.loop import Loop
from rtid.plants.linear import LinearPlant, simulate
from rtid.report import Report, Transition
from rtid.rows import Rows

Array = NDArray[np.float64]

PERIOD_S = 0.25  # blocks of 16 rows
INPUT, OUTPUT = "drive.volts", "drive.speed"
START_STAMP = 1_767_225_600.0  # 2026-01-01T00:00:00Z


def told(**changes: Any) -> settings.Loop:
    """A loop of order 1 with a memory of 600 rows whose baseline is due after 3000 rows."""
    fields: dict[str, Any] = {
        "name": "belt",
        "inputs": (INPUT,),
        "output": OUTPUT,
        "period_s": PERIOD_S,
        "model": settings.Model(dead_time_s=(0.0, 8 * PERIOD_S)),
        "memory_s": 600 * PERIOD_S,
        "stale_after_s": 5.0,
        "baseline": settings.Baseline(after_s=3000 * PERIOD_S),
        "units": {INPUT: "V", OUTPUT: "rad/s"},
    }
    return settings.Loop(**fields | changes)


def prbs(rows: int, *, bit: int = 5, seed: int = 0) -> Array:
    """A random two-level signal, -1 or 1 for `bit` rows each, (rows,)."""
    rng = np.random.default_rng(seed)
    return np.repeat(rng.choice([-1.0, 1.0], size=-(-rows // bit)), bit)[:rows]


def blocks(loop: settings.Loop, values: Array, *, first: int = 0) -> Iterator[Rows]:
    """`values`, (N, n), cut at the block boundaries of the grid; the first row is tick `first`."""
    size, at = loop.block_rows, 0
    while at < len(values):
        part = values[at : at + size - (first + at) % size]
        tick = first + at
        stamp = START_STAMP + (tick + len(part) - 1) * loop.period_s
        yield Rows(first=tick, time_s=tick * loop.period_s, values=part, stamp=stamp)
        at += len(part)


def later_by(shift: int, rows: Iterable[Rows]) -> Iterator[Rows]:
    """The same rows so many ticks later; a period of `PERIOD_S`."""
    for block in rows:
        seconds = shift * PERIOD_S
        yield replace(block, first=block.first + shift, time_s=block.time_s + seconds, stamp=block.stamp + seconds)


def feed(loop: Loop, rows: Iterable[Rows]) -> list[Report]:
    return [loop.advance(block) for block in rows]


def transitions(reports: Iterable[Report], *alarms: str) -> list[Transition]:
    """In order; of these alarms, or of all."""
    return [t for report in reports for t in report.transitions if not alarms or t.alarm in alarms]


@dataclass(frozen=True)
class Scenario:
    """A plant that is learnt on `learnt` rows and then goes on, changed or not, under `bit` rows of ±1 each."""

    plant: LinearPlant
    structure: Literal["output_error", "equation_error"] = "output_error"
    learnt: int = 3200
    bit: int = 12
    seed: int = 1
    period_s: float = PERIOD_S
    memory: int = 600  # rows
    budget: settings.AlarmBudget = field(default_factory=settings.AlarmBudget)
    tolerance: settings.Tolerance = field(default_factory=settings.Tolerance)

    @property
    def settings(self) -> settings.Loop:
        period = self.period_s
        model = settings.Model(self.structure, order=len(self.plant.lags), dead_time_s=(0.0, 8 * period))
        return told(
            model=model,
            period_s=period,
            memory_s=self.memory * period,
            baseline=settings.Baseline(after_s=(self.learnt - 200) * period),
            alarm_budget=self.budget,
            tolerance=self.tolerance,
        )

    def watching(self) -> Loop:
        """A loop that has its baseline; free to be used up."""
        return copy.deepcopy(_learnt(self))

    def goes_on(self, changed: LinearPlant, rows: int, *, seed: int = 0, inputs: Array | None = None) -> list[Report]:
        """What a loop that watches reports while the plant is `changed` for the next rows."""
        loop = self.watching()
        return feed(loop, self.next_rows(changed, rows, seed=seed, inputs=inputs))

    def next_rows(
        self, changed: LinearPlant, rows: int, *, seed: int = 0, inputs: Array | None = None
    ) -> Iterator[Rows]:
        """The blocks after learning. `inputs`, (rows,): what moves the plant then, if not more of the same."""
        before = prbs(self.learnt, bit=self.bit, seed=self.seed)
        after = prbs(rows, bit=self.bit, seed=1000 + seed) if inputs is None else inputs
        drive = np.concatenate((before[-500:], after))
        output = respond(self, drive, seed=2000 + seed, changes={500: changed})
        values = np.column_stack((drive, output))[500:]
        return blocks(self.settings, values, first=self.learnt)


def respond(scenario: Scenario, drive: Array, *, seed: int, changes: dict[int, LinearPlant] | None = None) -> Array:
    """The measured output, (rows,): noise on the sensor, or before the dynamics for `equation_error`."""
    if scenario.structure == "output_error":
        return simulate(scenario.plant, drive, period_s=scenario.period_s, seed=seed, changes=changes)
    return _process_noise(scenario, drive, seed=seed, changes=changes or {})


def _process_noise(scenario: Scenario, drive: Array, *, seed: int, changes: dict[int, LinearPlant]) -> Array:
    """The ARX plant of order 1 whose dead time is whole rows: what `equation_error` takes for granted."""
    rng = np.random.default_rng(seed)
    plant = scenario.plant
    y = plant.offset + plant.gain * drive[0]
    output = np.empty(len(drive))
    for k in range(len(drive)):
        plant = changes.get(k, plant)
        delay = round(plant.dead_time_s / scenario.period_s)
        pole = float(np.exp(-scenario.period_s / plant.lags[0]))
        output[k] = y = y + plant.noise * rng.standard_normal()
        y = pole * y + (1.0 - pole) * (plant.offset + plant.gain * drive[max(0, k - delay)])
    return output


@functools.cache
def _learnt(scenario: Scenario) -> Loop:
    loop = Loop(scenario.settings)
    drive = prbs(scenario.learnt, bit=scenario.bit, seed=scenario.seed)
    output = respond(scenario, drive, seed=scenario.seed + 500)
    feed(loop, blocks(scenario.settings, np.column_stack((drive, output))))
    assert loop.state == "watching", loop.report and loop.report.reason
    return loop


def changed(plant: LinearPlant, **fields: Any) -> LinearPlant:
    """`plant` with other values; `slower=1.35` stretches its time constants."""
    slower = fields.pop("slower", 1.0)
    lags = tuple(lag * slower ** (i + 1) for i, lag in enumerate(plant.lags))
    return replace(plant, **{"lags": lags} | fields)
