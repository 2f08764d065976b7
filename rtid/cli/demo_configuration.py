"""The configuration for the simulated conveyor: that of the demo, and of the plant simulator for installers."""

from __future__ import annotations

import os

PERIOD_S = 0.01

CONFIGURATION = """\
node: demo
state_dir: {state_dir}
sources:
  drive:
    serial: {{port: {port}, baud: 115200}}
    decode: csv
    time: {{column: 0, unit: ms}}
    checksum: xor8
    signals:
      volts: {{column: 1, unit: V, limits: [-24, 24]}}
      speed: {{column: 2, unit: rad/s, plausible: [-100, 100], resolution: 0.1}}
loops:
  conveyor:
    inputs: [drive.volts]
    output: drive.speed
    period_s: {period_s}
    model: {{structure: output_error, order: 2, dead_time_s: [0, 0.05]}}
    memory_s: 10
    baseline: {{automatic: true, after_s: {baseline_s:.0f}}}
    tolerance: {{gain_pct: 10, time_constant_pct: 20, dead_time_pct: 100, noise_pct: 50}}
    alarms: {{plant_drift: {{priority: medium}}}}
"""


def configuration(port: str, *, state_dir: str | os.PathLike[str], baseline_s: float) -> str:
    """YAML for the lines that `plant_feed.csv_line` makes, read from `port`."""
    return CONFIGURATION.format(port=port, state_dir=os.fspath(state_dir), period_s=PERIOD_S, baseline_s=baseline_s)
