"""`rtid hold`: a person holds a loop for a while; it goes on by itself."""

from __future__ import annotations

import argparse

from rtid.cli import operator
from rtid.cli.arguments import Subparsers, add_command


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "hold",
        description="Hold a loop: nothing is learnt or judged, for instance during maintenance. It ends by itself.",
        example="rtid hold conveyor --for 8h --reason 'belt is changed'",
    )
    operator.add_loop(parser)
    operator.add_duration(parser)
    operator.add_person(parser)
    operator.add_service(parser)


def run(args: argparse.Namespace) -> int:
    return operator.act(args, "hold", for_s=args.for_s, reason=args.reason)
