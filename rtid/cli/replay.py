"""`rtid replay`: the service's own pipeline over recorded data, as fast as it goes."""

from __future__ import annotations

import argparse
import json
import sys
from typing import Any

from rtid import config
from rtid.cli.arguments import Subparsers, add_command, add_config, add_json
from rtid.cli.recorded_run import RecordedRun
from rtid.errors import DataError, UsageError
from rtid.intake.csv_layout import CsvLayout
from rtid.intake.recorded import RecordedFeed
from rtid.service.state_dir import make_folder
from rtid.settings import Node
from rtid.valid_names import one_of

RESTART_PERIODS = 10  # a jump back of more than so many periods may be a restart of the device


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "replay",
        description="Run the same pipeline over recorded data; leave snapshots, trends, events and a summary in DIR.\n"
        "Opens no port and no connection; reads and writes no state of a service.",
        example="rtid replay node.yaml --feed drive=drive.csv --out result",
    )
    add_config(parser)
    parser.add_argument(
        "--feed",
        metavar="SOURCE=FILE.csv",
        action="append",
        required=True,
        help="recorded data of one source; once for each source",
    )
    parser.add_argument("--out", metavar="DIR", required=True, help="folder for the results; made if missing")
    parser.add_argument("--separator", default=",", metavar="C", help="between fields (default ,)")
    parser.add_argument("--decimal", default=".", metavar="C", help="decimal mark (default .)")
    parser.add_argument("--time-format", metavar="FORMAT", help="of the time, e.g. '%%d.%%m.%%Y %%H:%%M:%%S'")
    parser.add_argument("--time-column", metavar="NAME", default="time_s", help="column of the time (default time_s)")
    add_json(parser)


def run(args: argparse.Namespace) -> int:
    node = config.load(args.config)
    layout = CsvLayout(
        separator=args.separator, decimal=args.decimal, time_format=args.time_format, time_column=args.time_column
    )
    feeds = [_feed(node, text, layout) for text in args.feed]
    _refuse_twice([feed.name for feed in feeds])
    _refuse_unfed(node, {feed.name for feed in feeds})
    recorded = RecordedRun(node, feeds, make_folder(args.out))
    document = recorded.run()
    for kind, problem in document["rejected"].items():
        print(f"rtid: {problem['count']} rejected, {kind}: {problem['first']}", file=sys.stderr)
    print(json.dumps(document, allow_nan=False) if args.json else in_words(document, recorded.snapshots, args.out))
    return 0


def _feed(node: Node, text: str, layout: CsvLayout) -> RecordedFeed:
    name, equals, path = text.partition("=")
    if not equals or not path:
        raise UsageError(f"--feed {text}: write SOURCE=FILE.csv")
    if name not in node.sources:
        raise UsageError(f"--feed {text}: no source {name!r}; expected {one_of(name, node.sources)}")
    signals = tuple(signal.name for signal in node.sources[name].signals)
    periods = [loop.period_s for loop in node.loops.values() if not set(signals).isdisjoint(loop.signals)]
    restart_after_s = RESTART_PERIODS * min(periods, default=0.0)
    return RecordedFeed(name, path, signals=signals, layout=layout, restart_after_s=restart_after_s)


def _refuse_twice(names: list[str]) -> None:
    twice = next((name for name in names if names.count(name) > 1), None)
    if twice is not None:
        raise UsageError(f"source {twice} is fed twice; give one --feed for each source")


def _refuse_unfed(node: Node, fed: set[str]) -> None:
    for loop in node.loops.values():
        missing = sorted({signal.partition(".")[0] for signal in loop.signals} - fed)
        if missing:
            raise DataError(f"loop {loop.name} has no data for source {missing[0]}; add --feed {missing[0]}=FILE.csv")


def in_words(document: dict[str, Any], snapshots: dict[str, dict[str, Any]], out: str) -> str:
    lines = [f"{document['samples']} rows in {document['wall_s']:.2f} s; results in {out}"]
    for name, found in document["loops"].items():
        lines.append(f"{name}: {found['state']}, {found['health'].replace('_', ' ')}")
        lines += [
            f"  {_quantity(key, value)}"
            for key, value in snapshots[name]["quantities"].items()
            if value["value"] is not None
        ]
        alarms = ", ".join(f"{alarm} {count}x" for alarm, count in found["alarms"].items())
        lines.append(f"  alarms: {alarms or 'none'}")
    return "\n".join(lines)


def _quantity(name: str, found: dict[str, Any]) -> str:
    limits = "" if found["low"] is None else f"  [{found['low']:.4g} to {found['high']:.4g}]"
    return f"{name:<20}{found['value']:.4g}{limits} {found['unit']}".rstrip()
