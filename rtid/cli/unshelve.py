"""`rtid unshelve`: the end of a shelving before its time."""

from __future__ import annotations

import argparse

from rtid.cli import operator
from rtid.cli.arguments import Subparsers, add_command


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "unshelve",
        description="Hear of a shelved alarm again before its time.",
        example="rtid unshelve conveyor --alarm data_gap",
    )
    operator.add_loop(parser)
    operator.add_alarm(parser)
    operator.add_person(parser)
    operator.add_service(parser)


def run(args: argparse.Namespace) -> int:
    return operator.act(args, "unshelve", alarm=args.alarm, signal=args.signal, reason=args.reason)
