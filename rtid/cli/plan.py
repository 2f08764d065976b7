"""What a configuration would run, as one document: `rtid check` prints it in plain words or as JSON."""

from __future__ import annotations

import dataclasses
from typing import Any

from rtid.intake.serial_port import reset_warning
from rtid.service.intakes import origin
from rtid.settings import Loop, Node, Place, Source

PROGRAM_MB = 45.0  # interpreter, numpy and the clients, resident (tools/footprint.py)
BASELINE_ROWS = 20_000  # rows kept for the baseline, at the most
COPIES = 4  # of those rows while the baseline is fitted: signals, sensitivities, residuals
SHORT_MEMORY = 50  # periods below which the estimate of now rests on next to nothing
MANY_CANDIDATES = 200


def plan(node: Node) -> dict[str, Any]:
    return {
        "schema": "rtid/check/1",
        "node": node.name,
        "state_dir": node.state_dir,
        "broker": None if node.broker is None else node.broker.address,
        "publish_every_s": node.publish_every_s,
        "sources": {name: _source(source) for name, source in node.sources.items()},
        "loops": {name: _loop(node, loop) for name, loop in node.loops.items()},
        "topics": [] if node.broker is None else [f"{node.broker.prefix}/{node.name}/status"],
        "memory_mb": round(PROGRAM_MB + sum(_loop_mb(loop) for loop in node.loops.values()), 1),
        "remarks": [*node.notes, *(remark for loop in node.loops.values() for remark in _remarks(loop))],
    }


def dead_times(loop: Loop) -> int:
    """How many dead times on the grid the loop would try."""
    least, most = loop.model.dead_time_s
    return round((most - least) / loop.period_s) + 1


def _source(source: Source) -> dict[str, Any]:
    return {
        "from": origin(source),
        "decode": source.decode,
        "checksum": source.checksum,
        "time": _time_base(source),
        "signals": {
            signal.name: f"{_place(signal.place)}{', ' + signal.unit if signal.unit else ''}"
            for signal in source.signals
        },
        "warning": reset_warning(source) if source.serial is not None else None,
    }


def _loop(node: Node, loop: Loop) -> dict[str, Any]:
    broker, budget = node.broker, loop.alarm_budget
    return {
        "inputs": list(loop.inputs),
        "output": loop.output,
        "period_s": loop.period_s,
        "block_rows": loop.block_rows,
        "model": {
            "structure": loop.model.structure,
            "order": loop.model.order,
            "integrating": loop.model.integrating,
            "dead_time_s": list(loop.model.dead_time_s),
            "dead_times_tried": dead_times(loop),
        },
        "memory_s": loop.memory_s,
        "stale_after_s": loop.stale_after_s,
        "baseline_after_s": loop.baseline.after_s,
        "tolerance": dataclasses.asdict(loop.tolerance),
        "alarm_budget": {
            "false_alarms": budget.false_alarms,
            "per_days": budget.per_days,
            "rows_per_false_alarm": round(budget.rows_per_false_alarm(loop.period_s)),
        },
        "topics": []
        if broker is None
        else [
            f"{broker.prefix}/{node.name}/{loop.name}/{topic}"
            for topic in ("model", "drift", "health", "alarm/<name>", "snapshot")
        ],
    }


def _loop_mb(loop: Loop) -> float:
    return BASELINE_ROWS * len(loop.signals) * COPIES * 8.0 / 1e6


def _remarks(loop: Loop) -> list[str]:
    remarks = []
    if loop.memory_s < SHORT_MEMORY * loop.period_s:
        remarks.append(
            f"loop {loop.name}: memory_s {loop.memory_s:g} is below {SHORT_MEMORY} periods: the model "
            f"of now rests on very few rows; the default is {1000 * loop.period_s:g}"
        )
    if dead_times(loop) > MANY_CANDIDATES:
        remarks.append(
            f"loop {loop.name}: dead_time_s spans {dead_times(loop)} periods, which costs computing time; "
            "narrow the range or take a longer period_s"
        )
    return remarks


def _time_base(source: Source) -> str:
    if source.time is not None:
        return f"of the payload: {_place(source.time.place)}, in {source.time.unit}"
    return "of the SenML records" if source.decode == "senml" else "of arrival"


def _place(place: Place) -> str:
    topic = f" on {place.topic}" if place.topic else ""
    if place.column is not None:
        return f"column {place.column}{topic}"
    return f"{place.path or place.name or 'the payload'}{topic}"
