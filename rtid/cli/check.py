"""`rtid check`: reads the configuration and says what would run."""

from __future__ import annotations

import argparse
import json
from typing import Any

from rtid import config, schemas
from rtid.cli.arguments import Subparsers, add_command, add_config, add_json
from rtid.cli.plan import plan


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "check",
        description="Read the configuration and say what would run. Opens no port and no connection.",
        example="rtid check node.yaml",
    )
    add_config(parser, nargs="?")
    parser.add_argument("--schema", action="store_true", help="print the JSON Schema of a configuration, for editors")
    add_json(parser)
    parser.set_defaults(parser=parser)


def run(args: argparse.Namespace) -> int:
    if args.schema:
        print(json.dumps(schemas.load("configuration"), indent=2))
        return 0
    if args.config is None:
        args.parser.error("CONFIG is missing")
    found = plan(config.load(args.config))
    print(json.dumps(found, indent=2, allow_nan=False) if args.json else in_words(args.config, found))
    return 0


def in_words(path: str, found: dict[str, Any]) -> str:
    things = f"{_many(found['sources'], 'source')}, {_many(found['loops'], 'loop')}"
    lines = [f"{path}: good. Node {found['node']}, {things}."]
    for name, source in found["sources"].items():
        lines += ["", *_source_lines(name, source)]
    for name, loop in found["loops"].items():
        lines += ["", *_loop_lines(name, loop)]
    lines += ["", *_node_lines(found)]
    lines += [f"remark: {remark}" for remark in found["remarks"]]
    return "\n".join(lines)


def _source_lines(name: str, source: dict[str, Any]) -> list[str]:
    check = "" if source["checksum"] == "none" else f", checksum {source['checksum']}"
    lines = [f"source {name}: {source['from']}", f"  payload   {source['decode']}{check}"]
    lines += [f"  time      {source['time']}"]
    lines += [f"  signal    {signal}: {place}" for signal, place in source["signals"].items()]
    return lines + ([f"  note      {source['warning']}"] if source["warning"] else [])


def _loop_lines(name: str, loop: dict[str, Any]) -> list[str]:
    period, budget, allowed = loop["period_s"], loop["alarm_budget"], loop["tolerance"]
    memory_s, learn_s = loop["memory_s"], loop["baseline_after_s"]
    return [
        f"loop {name}: {', '.join(loop['inputs'])} -> {loop['output']}" if loop["inputs"] else f"loop {name}",
        f"  period    {period:g} s, blocks of {loop['block_rows']} rows; stale after {loop['stale_after_s']:g} s",
        f"  model     {_model(loop['model'])}",
        f"  memory    {memory_s:g} s = {memory_s / period:.0f} rows: how far back the model of now reaches",
        f"  baseline  learnt from at least {learn_s:g} s = {learn_s / period:.0f} rows in which the input moves",
        f"  tolerance gain {allowed['gain_pct']:g} %, time constants {allowed['time_constant_pct']:g} %, "
        f"dead time {allowed['dead_time_pct']:g} %, noise {allowed['noise_pct']:g} %",
        f"  budget    {_budget(budget)}",
        *(f"  topic     {topic}" for topic in loop["topics"]),
    ]


def _model(model: dict[str, Any]) -> str:
    least, most = model["dead_time_s"]
    dead_time = (
        f"known, {least:g} s"
        if least == most
        else (f"found between {least:g} and {most:g} s ({model['dead_times_tried']} tried)")
    )
    integrating = ", integrating" if model["integrating"] else ""
    return f"{model['structure']}, order {model['order']}{integrating}; dead time {dead_time}"


def _budget(budget: dict[str, Any]) -> str:
    rows = f"{budget['rows_per_false_alarm']:,}".replace(",", " ")
    number = "one false alarm" if budget["false_alarms"] == 1 else f"{budget['false_alarms']:g} false alarms"
    return f"at most about {number} in {budget['per_days']:g} days = one in {rows} rows"


def _node_lines(found: dict[str, Any]) -> list[str]:
    broker = found["broker"] or "none: events go to the state directory only"
    return [
        f"state in {found['state_dir']}",
        f"broker {broker}",
        *(f"topic {topic}" for topic in found["topics"]),
        f"memory about {found['memory_mb']:.0f} MB",
    ]


def _many(things: dict[str, Any], what: str) -> str:
    return f"{len(things)} {what}{'' if len(things) == 1 else 's'}"
