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
WIDEST_PERIODS = 1000  # from the least dead time to the most: computing time grows with it
LONGEST_PERIODS = 10_000  # dead time: half of the rows that a baseline is learnt from
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
        "dead_time_s": lambda below: _dead_time(below, period_s),
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


def _dead_time(entry: Entry, period_s: float) -> Range:
    """A known dead time, or the least and the most; within what can be computed and learnt."""
    least, most = _dead_time_ends(entry)
    if (most - least) / period_s > WIDEST_PERIODS:
        found = f"found a range of {(most - least) / period_s:.0f} periods"
        entry.refuse(f"{found}; expected at most {WIDEST_PERIODS}: narrow it or take a longer period_s")
    if most / period_s > LONGEST_PERIODS:
        found = f"found a dead time of {most / period_s:.0f} periods"
        entry.refuse(f"{found}; expected at most {LONGEST_PERIODS}: take a longer period_s")
    return least, most


def _dead_time_ends(entry: Entry) -> Range:
    if not isinstance(entry.item.content, tuple):
        known = seconds()(entry)
        return known, known
    least, most = pair("level")(entry)
    if least < 0:
        entry.refuse(f"found {least:g} s; expected dead times of at least 0")
    return least, most
