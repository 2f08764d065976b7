"""`rtid note`: a remark of a person in the event list."""

from __future__ import annotations

import argparse

from rtid.cli import operator
from rtid.cli.arguments import Subparsers, add_command


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "note",
        description="Leave a remark in the list of events, to be found when somebody asks what changed that day.",
        example="rtid note conveyor 'belt replaced' --by Kim",
    )
    operator.add_loop(parser)
    parser.add_argument("text", metavar="TEXT", help="the remark, one line")
    parser.add_argument("--by", metavar="NAME", required=True, help="who you are")
    operator.add_service(parser)


def run(args: argparse.Namespace) -> int:
    return operator.act(args, "note", text=args.text)
