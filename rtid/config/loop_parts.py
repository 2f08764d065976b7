"""What a loop is told beside its signals: model, baseline, tolerance, budget, alarms, controller."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any, get_args

from rtid.config.entry import Entry, Section, record
from rtid.config.values import FLAG, choice, number, pair, seconds
from rtid.settings import (
    DEFAULT_ALARMS,
    AlarmBudget,
    AlarmSetting,
    Baseline,
    Controller,
    Model,
    Priority,
    Range,
    Structure,
    Tolerance,
)
from rtid.valid_names import one_of

STRUCTURES: tuple[Structure, ...] = ("output_error", "equation_error")
PRIORITIES: tuple[Priority, ...] = get_args(Priority)
_PERCENT = number("a percentage", above=0, most=1000)
_COUNT = number(above=0, most=1e6)
_SPAN = number(above=0)

TOLERANCE = record(
    "the tolerance of each quantity",
    Tolerance,
    {"gain_pct": _PERCENT, "time_constant_pct": _PERCENT, "dead_time_pct": _PERCENT, "noise_pct": _PERCENT},
)
ALARM_BUDGET = record("false alarms in a number of days", AlarmBudget, {"false_alarms": _COUNT, "per_days": _COUNT})
CONTROLLER = record(
    "the present settings of the controller",
    Controller,
    {
        "kp": number(),
        "ti_s": seconds(above=0),
        "td_s": seconds(),
        "form": choice(("ideal", "series", "parallel")),
        "action": choice(("reverse", "direct")),
        "period_s": seconds(above=0),
        "filter_s": seconds(),
        "input_span": _SPAN,
        "output_span": _SPAN,
    },
)
_ALARM: dict[str, Callable[[Entry], Any]] = {
    "priority": choice(PRIORITIES),
    "on_delay_s": seconds(),
    "off_delay_s": seconds(),
    "latching": FLAG,
}


def model(entry: Entry, period_s: float) -> Model:
    """The model with its dead time, which is sought over ten periods unless it is given."""
    kinds: dict[str, Callable[[Entry], Any]] = {
        "structure": choice(STRUCTURES),
        "order": choice((1, 2)),
        "integrating": FLAG,
        "dead_time_s": _dead_time,
    }
    return Model(**{"dead_time_s": (0.0, 10 * period_s), **Section(entry, kinds).values(kinds)})


def baseline(entry: Entry, period_s: float) -> Baseline:
    """The baseline, learnt over 2000 periods at least unless it is given."""
    kinds: dict[str, Callable[[Entry], Any]] = {"automatic": FLAG, "after_s": seconds()}
    return Baseline(**{"after_s": 2000 * period_s, **Section(entry, kinds).values(kinds)})


def alarms(entry: Entry) -> dict[str, AlarmSetting]:
    """The settings of the alarms that are named; what they leave out keeps its default."""
    settings: dict[str, AlarmSetting] = {}
    for name, item in entry.mapping("alarm settings under the names of alarms").items():
        below = entry.below(name, item)
        if name not in DEFAULT_ALARMS:
            below.refuse(f"no such alarm; expected {one_of(name, DEFAULT_ALARMS)}")
        settings[name] = replace(DEFAULT_ALARMS[name], **Section(below, _ALARM).values(_ALARM))
        if name == "plant_shift" and settings[name].on_delay_s > 0:
            below.refuse("plant_shift has no on-delay; remove on_delay_s, or delay plant_drift")
    return settings


def _dead_time(entry: Entry) -> Range:
    """A known dead time, or the least and the most."""
    if not isinstance(entry.item.content, tuple):
        known = seconds()(entry)
        return known, known
    least, most = pair("level")(entry)
    if least < 0:
        entry.refuse(f"found {least:g} s; expected dead times of at least 0")
    return least, most
