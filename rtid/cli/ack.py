"""`rtid ack`: a person has seen an alarm."""

from __future__ import annotations

import argparse

from rtid.cli import operator
from rtid.cli.arguments import Subparsers, add_command


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "ack",
        description="Acknowledge an alarm: somebody has seen it. A latching alarm goes only after that.",
        example="rtid ack conveyor --alarm plant_drift --reason 'fitter is called'",
    )
    operator.add_loop(parser)
    operator.add_alarm(parser)
    operator.add_person(parser)
    operator.add_service(parser)


def run(args: argparse.Namespace) -> int:
    return operator.act(args, "ack", alarm=args.alarm, signal=args.signal, reason=args.reason)
