"""Makes the recorded streams in tests/recorded: data with their story, configuration and what is expected of them.

    python tools/make_recorded.py            all of them
    python tools/make_recorded.py NAME ...   only these

Each NAME.csv is made from a simulated plant with a fixed seed. NAME.expected.json names the state, alarms and
quantities that a replay must show: taken from the plant, not from the program, with bands that leave room for chance.
"""

from __future__ import annotations

import json
import sys
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

import numpy as np

from rtid.plants.linear import LinearPlant, first_order, random_steps, simulate, two_lags

FOLDER = Path(__file__).resolve().parents[1] / "tests" / "recorded"

CONFIGURATION = """\
# {story}
node: recorded
sources:
  plant:
    serial: {{port: /dev/not-opened}}
    decode: csv
    time: {{column: 0, unit: s}}
    signals:
      drive: {{column: 1, unit: "%"}}
      speed: {{column: 2, unit: rad/s, plausible: [-100, 400]}}
loops:
  loop:
    inputs: [plant.drive]
    output: plant.speed
    period_s: {period_s}
    model: {{order: {order}, dead_time_s: [0, {most_dead_time_s}]}}
    memory_s: {memory_s}
    baseline: {{after_s: {after_s}}}
"""


@dataclass(frozen=True, slots=True)
class Stream:
    """One recorded stream: rows at `period_s`, drive (rows,), speed (rows,), and what must be seen in it."""

    story: str
    period_s: float
    order: int
    after_rows: int
    drive: np.ndarray
    speed: np.ndarray
    expected: dict[str, Any]
    missing: frozenset[int] = field(default_factory=frozenset)

    def configuration(self) -> str:
        return CONFIGURATION.format(story=self.story, period_s=self.period_s, order=self.order,
                                    most_dead_time_s=5 * self.period_s, memory_s=1000 * self.period_s,
                                    after_s=self.after_rows * self.period_s)  # fmt: skip

    def table(self) -> str:
        rows = (k for k in range(len(self.drive)) if k not in self.missing)
        lines = (f"{k * self.period_s:.3f},{self.drive[k]:.1f},{self.speed[k]:.2f}\n" for k in rows)
        return "time_s,drive,speed\n" + "".join(lines)


BELT = two_lags(2.0, 0.5, 0.08, dead_time_s=0.03, noise=0.5)
OVEN = first_order(1.5, 20.0, dead_time_s=3.0, offset=20.0, noise=0.15)


def gain_falls() -> Stream:
    drive = random_steps(9000, low=20.0, high=80.0, hold=(30, 150), seed=12)
    weak = replace(BELT, gain=1.5)
    return _belt(drive, changes={5000: weak}, story="belt drive whose gain falls by 25 % at row 5000 (50 s)",
                 expected={"state": "watching", "quantities": {"gain": [1.47, 1.53]},
                           "alarms": [{"alarm": "plant_drift", "after_s": 50.0, "before_s": 75.0, "quantity": "gain"}],
                           "quiet_until_s": 50.0})  # fmt: skip


def rest_and_moves() -> Stream:
    """No excitation, then set-point moves, then a rest, then moves of a slower plant."""
    moves = random_steps(6000, low=20.0, high=80.0, hold=(30, 150), seed=13)
    drive = np.concatenate([np.full(1000, 50.0), moves, np.full(1500, 50.0), moves[:3000]])
    slow = two_lags(2.0, 0.8, 0.08, dead_time_s=0.03, noise=0.5)
    return _belt(drive, changes={8000: slow},
                 story="belt drive at rest, moving, at rest from 70 s; slower from 80 s, seen once it moves at 85 s",
                 expected={"state": "watching", "quantities": {"gain": [1.95, 2.05]},
                           "alarms": [{"alarm": "plant_drift", "after_s": 85.0, "before_s": 100.0}],
                           "quiet_until_s": 85.0})  # fmt: skip


def gap() -> Stream:
    """Twenty seconds are missing; the plant is the same before and after."""
    drive = random_steps(9000, low=20.0, high=80.0, hold=(30, 150), seed=14)
    stream = _belt(drive, story="belt drive; 20 s of data are missing from 50 s on, the plant stays the same",
                   expected={"state": "watching", "quantities": _belt_quantities(BELT),
                             "alarms": [{"alarm": "data_gap", "after_s": 69.0, "before_s": 72.0}],
                             "never": ["plant_drift"]})  # fmt: skip
    return replace(stream, missing=frozenset(range(5000, 7000)))


def oven() -> Stream:
    """A slow first-order plant with dead time."""
    drive = random_steps(6000, low=10.0, high=60.0, hold=(40, 200), seed=15)
    speed = simulate(OVEN, drive, period_s=1.0, seed=15)
    return Stream("an oven zone at one reading a second, nothing happens to it", 1.0, 1, 3000, drive, speed,
                  {"state": "watching", "never": ["plant_drift"],
                   "quantities": {"gain": [1.485, 1.515], "time_constant_1": [19.0, 21.0],
                                  "dead_time": [2.8, 3.2]}})  # fmt: skip


def _belt(drive: np.ndarray, *, story: str, expected: dict[str, Any],
          changes: dict[int, LinearPlant] | None = None) -> Stream:  # fmt: skip
    speed = simulate(BELT, drive, period_s=0.01, seed=len(drive), changes=changes)
    return Stream(story, 0.01, 2, 3000, drive, speed, expected)


def _belt_quantities(plant: LinearPlant) -> dict[str, list[float]]:
    return {"gain": [0.985 * plant.gain, 1.015 * plant.gain], "time_constant_1": [0.48, 0.52]}


STREAMS: dict[str, Callable[[], Stream]] = {
    "gain_falls": gain_falls,
    "rest_and_moves": rest_and_moves,
    "gap": gap,
    "oven": oven,
}


def main(names: list[str]) -> int:
    unknown = [name for name in names if name not in STREAMS]
    if unknown:
        print(f"make_recorded: no stream {unknown[0]}; the streams are: {', '.join(STREAMS)}", file=sys.stderr)
        return 64
    for name in names or STREAMS:
        stream = STREAMS[name]()
        (FOLDER / f"{name}.csv").write_text(stream.table(), encoding="ascii")
        (FOLDER / f"{name}.yaml").write_text(stream.configuration(), encoding="ascii")
        expected = json.dumps({"story": stream.story, **stream.expected}, indent=2) + "\n"
        (FOLDER / f"{name}.expected.json").write_text(expected, encoding="ascii")
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
