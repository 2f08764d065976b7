"""Reports and transitions with every field set, to be varied by a test."""

from __future__ import annotations

from typing import Any

from rtid.report import ActiveAlarm, Drift, Quantity, Report, Transition

STAMP = 1_767_225_600.25  # 2026-01-01T00:00:00.250Z
QUANTITIES = {
    "gain": Quantity(2.0, 0.01, 1.98, 2.02, "rad/s/V"),
    "time_constant_1": Quantity(0.5, 0.02, 0.46, 0.54, "s"),
    "dead_time": Quantity(None, None, None, None, "s"),
}


def make_report(**changes: Any) -> Report:
    drift = Drift(ratio=1.4, worst_quantity="gain", change_pct=-21.3, low_pct=-24.0, high_pct=-18.5,
                  detectable_gain_pct=3.0, last_informative=STAMP - 1.0)  # fmt: skip
    alarm = ActiveAlarm("out_of_range", "low", STAMP - 60.0, "speed is out of range", signal="drive.speed")
    fields: dict[str, Any] = {
        "loop": "conveyor",
        "time_s": 120.0,
        "stamp": STAMP,
        "samples": 12000,
        "state": "watching",
        "health": "out_of_specification",
        "since": STAMP - 5.0,
        "reason": "gain left its tolerance",
        "due": True,
        "quantities": QUANTITIES,
        "drift": drift,
        "alarms": (alarm,),
    }
    return Report(**fields | changes)


def make_transition(**changes: Any) -> Transition:
    fields: dict[str, Any] = {
        "alarm": "plant_drift",
        "transition": "active",
        "priority": "medium",
        "text": "gain fell by 21 %",
        "time_s": 120.0,
        "stamp": STAMP,
        "quantity": "gain",
        "change_pct": -21.3,
        "low_pct": -24.0,
        "high_pct": -18.5,
    }
    return Transition(**fields | changes)
