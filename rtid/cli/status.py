"""`rtid status`: how the running service and its loops are, the worst first."""

from __future__ import annotations

import argparse
import json
import textwrap
from collections.abc import Iterator
from typing import Any

from rtid.cli import operator
from rtid.cli.arguments import Subparsers, add_command, add_json
from rtid.cli.status_words import (
    WIDTH,
    ago,
    alarm_name,
    change,
    counted,
    limits,
    moment,
    rate,
    ratio,
    span,
    worst_first,
)

LABEL = 12  # columns before the text of a line


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "status",
        description="How the running service is: its sources, and its loops, the worst first.",
        example="rtid status conveyor",
    )
    parser.add_argument("loop", metavar="LOOP", nargs="?", help="one loop only; without it all of them")
    add_json(parser)
    operator.add_service(parser)


def run(args: argparse.Namespace) -> int:
    found = operator.ask(args, "status", loop=args.loop)
    print(json.dumps(found, indent=1, allow_nan=False, ensure_ascii=False) if args.json else "\n".join(in_words(found)))
    return 0


def in_words(found: dict[str, Any]) -> Iterator[str]:
    """Lines of at most 80 columns."""
    yield from _node(found)
    for name, loop in worst_first(found["loops"]):
        yield ""
        yield from _loop(name, loop)
    for name, source in found["sources"].items():
        yield ""
        yield from _source(name, source)


def _node(found: dict[str, Any]) -> Iterator[str]:
    yield f"node {found['node']}: rtid {found['version']}, up {span(found['uptime_s'])}"
    yield from _line("state in", found["state_dir"])
    events = found["events"]
    waiting = f"; {events['unwritten']} wait for the disk" if events["unwritten"] else ""
    yield from _line("events", f"{events['sequence']}{waiting}")
    broker = found["broker"]
    if broker is None:
        yield from _line("broker", "none")
        return
    lost = {kind: broker[kind] for kind in ("failed", "dropped") if broker[kind]}
    words = [
        broker["address"],
        "connected" if broker["connected"] else "not connected",
        f"{broker['sent']} messages sent",
    ]
    yield from _line("broker", ", ".join([*words, counted(lost)] if lost else words))


def _loop(name: str, loop: dict[str, Any]) -> Iterator[str]:
    yield f"loop {name}: {loop['health']}, {loop['state']} since {moment(loop['since'])}"
    yield from _line("reason", loop["reason"])
    if loop["progress"] and loop["state"] != "learning":  # else the reason says it
        yield from _line("baseline", loop["progress"])
    if loop["baseline"]:
        yield from _line("baseline", loop["baseline"])
    if loop["drift_ratio"] is not None:
        yield from _line("drift", f"{ratio(loop)} of its threshold; worst {change(loop)}{limits(loop)}")
    if loop["detectable_gain_pct"] is not None:
        yield from _line("sees", f"a change of gain of {loop['detectable_gain_pct']:.1f} % or more")
    ages = f"last block {ago(loop['last_block_age_s'])}, last informative {ago(loop['last_informative_age_s'])}"
    yield from _line("data", f"{loop['samples']} rows; {ages}")
    if loop["rejected"]:
        yield from _line("lost", counted(loop["rejected"]))
    yield from _deeds(loop)


def _deeds(loop: dict[str, Any]) -> Iterator[str]:
    """Alarms that stand, and what people have done that ends by itself."""
    for alarm in loop["alarms"]:
        seen = "acknowledged" if alarm["acknowledged"] else "not acknowledged"
        yield from _line("alarm", f"{alarm_name(alarm)}, {alarm['priority']}, since {moment(alarm['since'])}, {seen}")
    for shelved in loop["shelved"]:
        yield from _line("shelved", f"{alarm_name(shelved)}, until {moment(shelved['until'])}")
    if loop["hold"]:
        yield from _line("held", f"by {loop['hold']['by']}, until {moment(loop['hold']['until'])}")


def _source(name: str, source: dict[str, Any]) -> Iterator[str]:
    connected = "connected" if source["connected"] else "NOT CONNECTED"
    yield f"source {name}: {connected}, {rate(source['rate_per_s'])}"
    yield from _line("from", source["from"])
    yield from _line(
        "messages",
        f"{source['messages']}, readings {source['readings']}; last message {ago(source['last_message_age_s'])}",
    )
    others = {kind: source[kind] for kind in ("dropped", "retained", "reconnects") if source[kind]}
    if others:
        yield from _line("besides", counted(others))
    for kind, count in source["rejected"].items():
        yield from _line("rejected", f"{count} {kind}; the first: {source['first_rejected'][kind]}")
    for topic, skew in source["skew_s"].items():
        if abs(skew) >= 0.01:
            yield from _line("later", f"{topic} by {skew:.2f} s")


def _line(label: str, text: str) -> list[str]:
    head = f"  {label}".ljust(LABEL)
    return textwrap.wrap(text, WIDTH, initial_indent=head, subsequent_indent=" " * LABEL) or [head]
