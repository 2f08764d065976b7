"""Health by NAMUR NE 107: derived from state and alarms, never set, never `good` without a live verification."""

from __future__ import annotations

from rtid.report import ActiveAlarm, Health, State

_BY_STATE: dict[State, tuple[Health, str]] = {
    "waiting": ("function_check", "waiting: no reading yet"),
    "learning": ("function_check", "learning: no baseline yet"),
    "held": ("function_check", "held by a person: nothing is learnt or judged"),
    "inactive": ("function_check", "inactive: the loop's gate is closed, nothing is learnt or judged"),
    "stale": ("failure", "stale: the data have stopped"),
}
_BY_ALARM: dict[str, Health] = {
    "estimate_invalid": "failure",
    "data_stale": "failure",
    "out_of_range": "out_of_specification",
    "cannot_judge": "function_check",
    "plant_drift": "maintenance_required",
    "plant_shift": "maintenance_required",
    "noise_change": "maintenance_required",
    "oscillation": "maintenance_required",
    "frozen_signal": "failure",
    "saturated": "out_of_specification",
    "outliers": "out_of_specification",
    "timing": "out_of_specification",
    "data_gap": "function_check",
    "storage": "maintenance_required",
    "clock": "maintenance_required",
}
_ORDER: tuple[Health, ...] = ("failure", "function_check", "out_of_specification", "maintenance_required")


def health_of(state: State, alarms: tuple[ActiveAlarm, ...], *, detail: str, unchanged: str) -> tuple[Health, str]:
    """Health and its reason. `detail`: what the state itself has to say; `unchanged`: the words for `good`."""
    if state != "watching":
        health, reason = _BY_STATE[state]
        return health, detail or reason
    found = [(_BY_ALARM[a.alarm], a) for a in alarms if a.alarm in _BY_ALARM]
    for health in _ORDER:
        for level, alarm in found:
            if level == health:
                return health, alarm.text
    return "good", unchanged
