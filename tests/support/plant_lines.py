"""A known plant as the lines of a board: `ms,volts,speed*XX`, and the configuration that reads them."""

from __future__ import annotations

from pathlib import Path

from rtid.cli.plant_feed import csv_line
from rtid.plants.linear import LinearPlant, random_steps, simulate, two_lags

PERIOD_S = 0.01
PLANT = two_lags(2.0, 0.4, 0.05, dead_time_s=0.02, noise=0.2)

CONFIGURATION = """\
node: test-node
state_dir: {folder}/state
{broker}
sources:
  drive:
    serial: {{port: {port}, baud: 115200}}
    decode: csv
    time: {{column: 0, unit: ms}}
    checksum: xor8
    signals:
      volts: {{column: 1, unit: V}}
      speed: {{column: 2, unit: rad/s}}
loops:
  belt:
    inputs: [drive.volts]
    output: drive.speed
    period_s: 0.01
    model: {{order: 2, dead_time_s: [0, 0.05]}}
    memory_s: 20
    stale_after_s: {stale_after_s}
    baseline: {{after_s: 20}}
"""


def configure(folder: Path, port: str | Path = "/dev/none", *, broker: int | None = None,
              stale_after_s: float = 60.0) -> Path:  # fmt: skip
    """node.yaml in `folder`; `broker` is a port on loopback."""
    path = folder / "node.yaml"
    line = "" if broker is None else f"broker: {{host: 127.0.0.1, port: {broker}}}"
    path.write_text(CONFIGURATION.format(folder=folder, port=port, broker=line, stale_after_s=stale_after_s))
    return path


def plant_rows(rows: int, *, plant: LinearPlant = PLANT, seed: int = 1, first: int = 0) -> list[bytes]:
    """Lines of a run of the plant under random steps; their times begin at row `first`."""
    volts = random_steps(rows, low=2.0, high=12.0, hold=(20, 120), seed=seed)
    speed = simulate(plant, volts, period_s=PERIOD_S, seed=seed)
    return [csv_line((PERIOD_S * (first + k), float(volts[k]), float(speed[k]))).rstrip() for k in range(rows)]
