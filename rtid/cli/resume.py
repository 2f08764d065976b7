"""`rtid resume`: the end of a hold before its time."""

from __future__ import annotations

import argparse

from rtid.cli import operator
from rtid.cli.arguments import Subparsers, add_command


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "resume",
        description="End a hold before its time.",
        example="rtid resume conveyor --reason 'belt runs again'",
    )
    operator.add_loop(parser)
    operator.add_person(parser)
    operator.add_service(parser)


def run(args: argparse.Namespace) -> int:
    return operator.act(args, "resume", reason=args.reason)
