"""`rtid rebaseline`: learn a new baseline, list all that there were, or put an old one in force again."""

from __future__ import annotations

import argparse
from typing import Any

from rtid.actions import BECAUSE
from rtid.cli import operator
from rtid.cli.arguments import Subparsers, add_command

GAIN_WIDTH = 26


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "rebaseline",
        description="Learn a new baseline from now on, after the plant was changed on purpose. Every older one stays\n"
        "listed and can be put in force again.",
        example="rtid rebaseline conveyor --by Kim --because repair --reason 'new belt'",
    )
    operator.add_loop(parser)
    choice = parser.add_mutually_exclusive_group()
    choice.add_argument("--because", choices=BECAUSE, help="why the old one no longer holds")
    choice.add_argument("--list", action="store_true", help="list all baselines of the loop and change nothing")
    choice.add_argument("--restore", metavar="ID", help="put this one in force again, instead of learning")
    operator.add_person(parser)
    operator.add_service(parser)
    parser.set_defaults(parser=parser)


def run(args: argparse.Namespace) -> int:
    if args.list:
        print("\n".join(table(operator.ask(args, "baselines", loop=args.loop)["baselines"])))
        return 0
    missing = [f"--{name}" for name in ("by", "reason") if getattr(args, name) is None]
    if args.because is None and args.restore is None:
        missing.append(f"--because ({', '.join(BECAUSE)}), or --restore ID, or --list")
    if missing:
        args.parser.error(f"a baseline is changed only with {' and '.join(missing)}")
    if args.restore is not None:
        return operator.act(args, "restore", baseline=args.restore, reason=args.reason)
    return operator.act(args, "rebaseline", because=args.because, reason=args.reason)


def table(baselines: list[dict[str, Any]]) -> list[str]:
    """One line each, the one in force with a star."""
    if not baselines:
        return ["no baseline yet: the loop is learning its first"]
    width = max(len(each["id"]) for each in baselines)
    lines = [
        f"{'*' if each['in_force'] else ' '} {each['id']:<{width}}  {each['time'][:16].replace('T', ' ')} UTC  "
        f"{_gain(each):<{GAIN_WIDTH}}  {_why(each)}"
        for each in baselines
    ]
    in_force = any(each["in_force"] for each in baselines)
    return lines if in_force else [*lines, "none is in force: a new one is learnt"]


def _gain(baseline: dict[str, Any]) -> str:
    gain = baseline["quantities"].get("gain", {})
    return f"gain {gain['value']:.4g} {gain['unit']}" if gain.get("value") is not None else "gain unknown"


def _why(baseline: dict[str, Any]) -> str:
    if baseline["because"] is None:
        return "learnt by itself"
    return f"{baseline['because']}, {baseline['by']}: {baseline['reason']}"
