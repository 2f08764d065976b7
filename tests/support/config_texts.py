"""A small configuration, and how a text is loaded."""

from __future__ import annotations

from pathlib import Path

from rtid import config
from rtid.settings import Node

BASE = """\
node: n1
broker: {host: localhost}
sources:
  drive:
    serial: {port: /dev/ttyS9}
    decode: csv
    time: {column: 0, unit: ms}
    signals:
      volts: {column: 1, unit: V, limits: [-24, 24]}
      speed: {column: 2, unit: rad/s}
  hall:
    mqtt: {topic: "plant/hall/#"}
    decode: json
    signals:
      valve: {path: valve, topic: plant/hall/ahu1}
      temp: {path: temp}
loops:
  belt:
    inputs: [drive.volts]
    output: drive.speed
    period_s: 0.01
"""


def load_text(text: str | bytes, folder: Path) -> Node:
    """The settings in the text, with no environment."""
    path = folder / "c.yaml"
    path.write_bytes(text.encode() if isinstance(text, str) else text)
    return config.load(path, environ={})
