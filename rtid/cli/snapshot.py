"""`rtid snapshot`: the model of now, with its validation, as a file."""

from __future__ import annotations

import argparse
import json

from rtid.cli import operator
from rtid.cli.arguments import Subparsers, add_command
from rtid.publish.files import write_json


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "snapshot",
        description="The model of now, with its uncertainty and its validation, as one JSON document.",
        example="rtid snapshot conveyor --out conveyor.snapshot.json",
    )
    operator.add_loop(parser)
    parser.add_argument("--out", metavar="FILE", help="write it there, in one step; an older file is replaced")
    operator.add_person(parser)
    operator.add_service(parser)


def run(args: argparse.Namespace) -> int:
    document = operator.ask(args, "snapshot", loop=args.loop, by=args.by, reason=args.reason)
    if args.out is None:
        print(json.dumps(document, indent=1, allow_nan=False, ensure_ascii=False))
    else:
        write_json(args.out, document)
        print(f"{args.out}: model of loop {args.loop} at {document['time']}")
    return 0
