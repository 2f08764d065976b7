"""`rtid shelve`: nothing is heard of an alarm for a while; then it is heard again by itself."""

from __future__ import annotations

import argparse

from rtid.cli import operator
from rtid.cli.arguments import Subparsers, add_command


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "shelve",
        description="Hear nothing of an alarm for a while. It ends by itself, and an alarm that stands is heard again.",
        example="rtid shelve conveyor --alarm data_gap --for 2d --reason 'the network is rebuilt'",
    )
    operator.add_loop(parser)
    operator.add_alarm(parser)
    operator.add_duration(parser)
    operator.add_person(parser)
    operator.add_service(parser)


def run(args: argparse.Namespace) -> int:
    return operator.act(args, "shelve", alarm=args.alarm, signal=args.signal, for_s=args.for_s, reason=args.reason)
