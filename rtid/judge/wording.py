"""What a person reads: texts of alarms and reasons of health, in plain words of the trade."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from rtid.judge.change import QuantityChange
from rtid.report import Quantity

CAUTION = (
    "Before you touch the machine: isolate and lock it, wait for stored energy and hot parts, mind automatic restart. "
    "rtid only advises; it is no safety function."
)
RESTARTED = "waiting: rtid was restarted and no reading has come since; what is shown was known before"
INVALID = "The estimate met numbers that it cannot go on from; it stands still."
_LOOK_FIRST = {
    "gain": "Look first at what makes the output weaker or stronger for the same input: friction, fouling, supply, "
    "winding or heater resistance, a leaking or sticking valve.",
    "time_constant_1": "Look first at what stores energy or drains it: inertia, load, fouling, flow, insulation.",
    "time_constant_2": "Look first at the faster storage: winding, sensor pocket, filter.",
    "natural_frequency": "Look first at stiffness and mass: couplings, belts, mountings, load.",
    "damping_ratio": "Look first at what damps the motion: friction, lubrication, dampers.",
    "dead_time": "Look first at transport and signal delays: belt or fluid speed, sampling, a slow transmitter, play.",
}
_NAMES = {"dead_time": "dead time", "natural_frequency": "natural frequency", "damping_ratio": "damping ratio"}


def baseline_text(identity: str, quantities: Mapping[str, Quantity], *, provisional: bool) -> str:
    known = [f"{quantity_name(n)} {_figure(q)}" for n, q in quantities.items() if q.value is not None and n != "noise"]
    rider = "; provisional, the false-alarm budget is not promised yet" if provisional else ""
    return f"baseline {identity} accepted: {', '.join(known)}{rider}"


def _figure(quantity: Quantity) -> str:
    unit = "" if quantity.unit == "1" else f" {quantity.unit}"
    return f"{quantity.value:.4g} ({quantity.low:.4g} … {quantity.high:.4g}){unit}"


def quantity_name(name: str) -> str:
    """As a person says it; the later inputs' quantities by the number of their input."""
    kind, _, number = name.rpartition("_")
    if kind in ("gain", "dead_time") and number.isdigit():
        return f"{kind.replace('_', ' ')} of input {number}"
    return _NAMES.get(name, name.replace("_", " "))


def date(stamp: float) -> str:
    """To the minute, for reading."""
    return str(np.datetime64(int(stamp), "s").astype("datetime64[m]")).replace("T", " ") + " UTC"


def drift_text(change: QuantityChange, baseline_stamp: float) -> str:
    """`plant_drift`: what, how much with limits, since which baseline, what to look at first, the caution."""
    return (
        f"{_amount(change)} (95 % limits {change.low_pct:+.1f} … {change.high_pct:+.1f} %), beyond the tolerance of "
        f"{change.tolerance_pct:.0f} %, against the baseline of {date(baseline_stamp)}. "
        f"{_look_first(change.name)} {CAUTION}"
    )


def _look_first(name: str) -> str:
    if name in _LOOK_FIRST:
        return _LOOK_FIRST[name]
    return f"Look first at the disturbance of {quantity_name(name)}: its instrument and its way into the plant."


def shift_text(change: QuantityChange | None, baseline_stamp: float) -> str:
    """`plant_shift`: a real change that is within tolerance or not yet known to be beyond it; None: undecided."""
    what = _amount(change) if change else "the quantity is not decided yet"
    return (
        f"The plant no longer answers as at the baseline of {date(baseline_stamp)}; {what}. "
        "It is within tolerance or not yet known to be beyond it."
    )


def blind_text(detectable_pct: float | None, tolerance_pct: float) -> str:
    seen = "no gain change" if detectable_pct is None else f"only a gain change of {detectable_pct:.0f} % or more"
    return (
        f"The input has moved too little lately: {seen} would be seen, the tolerance is {tolerance_pct:.0f} %. "
        "Nothing is wrong with the plant because of this; it cannot be judged."
    )


def gap_text(gap_s: float) -> str:
    return f"No readings for {gap_s:.4g} s; the model restarted at the steady state of the present input."


def restart_text() -> str:
    return "The device's clock began anew: it restarted. Rows from before and after are not mixed."


def held_text(until_stamp: float, by: str) -> str:
    return f"held by {by} until {date(until_stamp)}, then it goes on by itself: nothing is learnt or judged until then"


def shelved_text(alarm: str, until_stamp: float) -> str:
    return f"{alarm} is shelved until {date(until_stamp)}, then it is heard again by itself"


def stale_text(seconds: float) -> str:
    return f"No reading for {seconds:.3g} s. Look first at the cable, the port or the broker, and the device's supply."


def unchanged_text(baseline_stamp: float, *, provisional: bool) -> str:
    rider = " (provisional: the false-alarm budget is not promised yet)" if provisional else ""
    return f"unchanged since the baseline of {date(baseline_stamp)}{rider}"


def _amount(change: QuantityChange) -> str:
    side = "above" if change.change_pct >= 0 else "below"
    return f"{quantity_name(change.name)} is {abs(change.change_pct):.1f} % {side} the baseline"
