"""The `loops` section: one plant each, with every default that depends on its period filled in."""

from __future__ import annotations

from collections.abc import Collection, Mapping
from dataclasses import replace
from typing import Any

from rtid.config.entry import Entry, Kind, Section
from rtid.config.gate import gate
from rtid.config.loop_parts import ALARM_BUDGET, CONTROLLER, TOLERANCE, alarms, baseline, model
from rtid.config.values import elements, named, number, seconds, signal_of
from rtid.settings import AlarmBudget, Loop, Signal, Source, Tolerance

_KEYS = (
    "inputs",
    "output",
    "period_s",
    "model",
    "memory_s",
    "stale_after_s",
    "active_when",
    "baseline",
    "tolerance",
    "alarm_budget",
    "alarms",
    "controller",
)
_PERIOD = number("a number of seconds", least=1e-6, most=1e6)


def loops(
    entry: Entry, sources: Mapping[str, Source], *, budget: AlarmBudget | None, pace: Mapping[str, Any]
) -> dict[str, Loop]:
    """Every loop by its name.

    `budget` is the node's one budget: equal parts of it go to the loops that have none of their own. `pace` holds
    `publish_every_s` when the file gives it.
    """
    signals = {signal.name: signal for source in sources.values() for signal in source.signals}

    def read(below: Entry, name: str) -> Loop:
        loop = _describe(_loop(below, name, tuple(signals)), signals)
        _check_time_base(below, loop, sources)
        return replace(loop, **pace)

    found = named(entry, read, "the loops that are watched")
    return found if budget is None else _share(budget, found, _without_budget(entry))


def _share(budget: AlarmBudget, loops: Mapping[str, Loop], names: Collection[str]) -> dict[str, Loop]:
    part = replace(budget, false_alarms=budget.false_alarms / max(1, len(names)))
    return {name: replace(loop, alarm_budget=part) if name in names else loop for name, loop in loops.items()}


def _without_budget(entry: Entry) -> tuple[str, ...]:
    items = entry.mapping("loops").items()
    return tuple(name for name, item in items if "alarm_budget" not in entry.below(name, item).mapping("a loop"))


def _loop(entry: Entry, name: str, known: tuple[str, ...]) -> Loop:
    section = Section(entry, _KEYS)
    period_s = section.need("period_s", _PERIOD)
    signal = signal_of(known)
    inputs = section.need("inputs", _inputs(signal))
    output = section.need("output", signal)
    if output in inputs:
        section.at("output").refuse(f"{output} is an input as well; expected the measured value it acts on")
    told = model(section.part("model"), period_s)
    if len(inputs) > 1 and told.structure == "equation_error":
        section.at("inputs").refuse("equation_error takes one input in this version; use output_error for several")
    return Loop(
        name=name,
        inputs=inputs,
        output=output,
        period_s=period_s,
        model=told,
        memory_s=section.get("memory_s", seconds(least=period_s), 1000 * period_s),
        stale_after_s=section.get("stale_after_s", seconds(least=period_s), max(5 * period_s, 5.0)),
        baseline=baseline(section.part("baseline"), period_s),
        active_when=section.get("active_when", lambda below: gate(below, signal), None),
        tolerance=section.get("tolerance", TOLERANCE, Tolerance()),
        alarm_budget=section.get("alarm_budget", ALARM_BUDGET, AlarmBudget()),
        alarms=section.get("alarms", alarms, {}),
        controller=section.get("controller", CONTROLLER, None),
    )


def _inputs(signal: Kind[str]) -> Kind[tuple[str, ...]]:
    expected = "a list of signals: [source.signal]"

    def take(entry: Entry) -> tuple[str, ...]:
        names = tuple(signal(each) for each in elements(entry, expected))
        if len(set(names)) < len(names):
            entry.refuse("found one signal twice; expected each input once")
        return names or entry.refuse(f"found an empty list; expected {expected}")

    return Kind(expected, take)


def _describe(loop: Loop, signals: Mapping[str, Signal]) -> Loop:
    """The loop with what its sources say of its signals."""
    own = [signals[name] for name in loop.signals]
    return replace(
        loop,
        units={signal.name: signal.unit for signal in own},
        ranges={signal.name: signal.plausible for signal in own if signal.plausible is not None},
        limits={signal.name: signal.limits for signal in own if signal.limits is not None},
        resolutions={signal.name: signal.resolution for signal in own if signal.resolution is not None},
    )


def _check_time_base(entry: Entry, loop: Loop, sources: Mapping[str, Source]) -> None:
    """Payload times and arrival times have nothing to do with each other; a row cannot join them."""
    own = [sources[name] for name in dict.fromkeys(signal.partition(".")[0] for signal in loop.signals)]
    for source in own[1:]:
        if source.has_payload_time != own[0].has_payload_time:
            stamped, bare = (source, own[0]) if source.has_payload_time else (own[0], source)
            entry.refuse(
                f"source '{stamped.name}' has times in its payload and source '{bare.name}' has not; "
                "expected one time base in a loop: `time` in both or in neither"
            )
