"""What the demo says on the terminal: one line for each thing that happens, in plain words."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path
from typing import Any, TextIO

from rtid.plants.conveyor import Ageing
from rtid.plants.motor import Motor
from rtid.report import Quantity, Report, Transition

EVERY_S = 5.0  # between two lines of progress
SHOWN = ("gain", "time_constant_1", "time_constant_2", "dead_time")
CAUTION = "All of this is simulated. rtid watches and never moves a plant; its figures are not for automatic use."


class Story:
    """`tell` what the service reported so far; `close` says how it ended, and gives the exit code."""

    def __init__(self, out: TextIO, *, ageing: Ageing, rows_wanted: int) -> None:
        self._out = out
        self._ageing = ageing
        self._rows_wanted = rows_wanted
        self._next_line = 0.0
        self._arrived = self._learnt = self._changed = self._drifted = False

    def open(self, port: str, folder: Path) -> None:
        self._say(None, f"A simulated conveyor motor (invented) sends 100 lines a second to {port}, a pseudo-terminal.")
        self._say(None, f"The service reads it as it would read a board. Configuration and state lie in {folder}.")
        self._say(None, CAUTION)

    def tell(self, news: Iterable[Report | Transition], seconds: float) -> None:
        """`seconds` since the start of the plant."""
        if not self._changed and seconds >= self._ageing.start_s:
            self._changed = True
            self._say(seconds, "the plant now changes: bearing friction and winding temperature rise")
        for item in news:
            if isinstance(item, Transition):
                self._event(item, seconds)
            else:
                self._report(item, seconds)

    def close(self) -> int:
        self._say(None, "\n" + CAUTION)
        if self._drifted:
            self._say(None, "The drift was seen and alarmed.")
            return 0
        self._say(None, "The drift was not alarmed in this run.")
        return 1

    def _event(self, transition: Transition, seconds: float) -> None:
        if transition.alarm is None:
            return
        self._drifted = self._drifted or (self._changed and transition.alarm == "plant_drift")
        kind = "ALARM" if transition.transition in {"active", "updated"} else "alarm"
        self._say(seconds, f"{kind} {transition.alarm} {transition.transition}: {transition.text}")

    def _report(self, report: Report, seconds: float) -> None:
        if not self._arrived:
            self._arrived = True
            self._say(seconds, "data arrive; rtid learns what is normal for this plant")
        if report.state == "watching" and not self._learnt:
            self._learnt = True
            self._say(seconds, f"baseline learnt: {_quantities(report.quantities)}")
        if seconds >= self._next_line:
            self._next_line = EVERY_S * (seconds // EVERY_S + 1)
            self._say(seconds, self._progress(report))

    def _progress(self, report: Report) -> str:
        if report.state != "watching":
            known = _quantities(report.quantities)
            return f"{report.state}: {report.samples} rows of {self._rows_wanted}{'; ' + known if known else ''}"
        ratio = "unknown" if report.drift.ratio is None else f"{report.drift.ratio:.2f}"
        return f"drift ratio {ratio} (1 is the threshold); {_quantities(report.quantities, ('gain',))}"

    def _say(self, seconds: float | None, text: str) -> None:
        label = "" if seconds is None else f"{seconds:6.1f} s  "
        print(f"{label}{text}", file=self._out, flush=True)


def comparison(snapshot: dict[str, Any], motor: Motor) -> str:
    """The estimates beside the values that the simulated plant has at the end."""
    slow, fast = motor.time_constants_s or (None, None)
    truth = {
        "gain": motor.gain,
        "natural_frequency": motor.natural_frequency,
        "damping_ratio": motor.damping_ratio,
        "time_constant_1": slow,
        "time_constant_2": fast,
    }
    lines = [f"{'quantity':<20}{'estimate':>10}  {'95 % limits':<22}{'true value':>10}"]
    for name, true_value in truth.items():
        found = snapshot["quantities"].get(name, {})
        limits = f"{_number(found.get('low'))} to {_number(found.get('high'))}"
        lines.append(f"{name:<20}{_number(found.get('value')):>10}  {limits:<22}{_number(true_value):>10}")
    return "\n".join(lines)


def _quantities(quantities: dict[str, Quantity], names: tuple[str, ...] = SHOWN) -> str:
    known = [(name, quantities[name]) for name in names if name in quantities and quantities[name].value is not None]
    return ", ".join(
        f"{name} {_number(q.value)} [{_number(q.low)} to {_number(q.high)}] {q.unit}".rstrip() for name, q in known
    )


def _number(value: float | None) -> str:
    return "unknown" if value is None else f"{value:.3g}"
