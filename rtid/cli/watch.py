"""`rtid watch`: the loops of the running service as a table that refreshes itself."""

from __future__ import annotations

import argparse
import shutil
import sys
import time
from typing import Any

from rtid.cli import operator
from rtid.cli.arguments import Subparsers, add_command
from rtid.cli.status_words import WIDTH, alarm_name, change, moment, rate, ratio, span, worst_first

EVERY_S = 1.0
LEAST_S, MOST_S = 0.2, 3600.0
CLEAR = "\x1b[2J"
HOME, REST_OF_LINE, REST_OF_SCREEN = "\x1b[H", "\x1b[K", "\x1b[J"


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "watch",
        description="The loops of the running service, the worst first, live until Ctrl-C. Where the output is no\n"
        "terminal, one table after the other.",
        example="rtid watch --every 5",
    )
    parser.add_argument("--once", action="store_true", help="one table, then end")
    parser.add_argument(
        "--every", type=_seconds, default=EVERY_S, metavar="S", help=f"seconds between two (default {EVERY_S:g})"
    )
    operator.add_service(parser)


def run(args: argparse.Namespace) -> int:
    """Ends with Ctrl-C; with Unavailable when the service ends."""
    refresh = sys.stdout.isatty() and not args.once
    if refresh:
        sys.stdout.write(CLEAR)
    try:
        while True:
            _show(operator.ask(args, "status"), refresh=refresh)
            if args.once:
                return 0
            time.sleep(args.every)
    except KeyboardInterrupt:
        return 0


def table(found: dict[str, Any], width: int = WIDTH) -> list[str]:
    """Lines of at most so many columns."""
    clock = found["time"][11:19]
    lines = [
        f"node {found['node']}  {clock} UTC  up {span(found['uptime_s'])}  {found['events']['sequence']} events",
        f"{'LOOP':<16} {'STATE':<8} {'HEALTH':<20} {'DRIFT':>6} WORST",
    ]
    lines += [
        f"{name:<16.16} {loop['state']:<8} {loop['health']:<20} {ratio(loop):>6} {change(loop)}"
        for name, loop in worst_first(found["loops"])
    ]
    lines += [
        f"alarm {name}: {alarm_name(alarm)}, {alarm['priority']}, since {moment(alarm['since'])}"
        for name, loop in worst_first(found["loops"])
        for alarm in loop["alarms"]
    ]
    lines += [
        f"source {name}: {'connected' if source['connected'] else 'NOT CONNECTED'}, {rate(source['rate_per_s'])}"
        for name, source in found["sources"].items()
    ]
    return [line if len(line) <= width else f"{line[: width - 1]}…" for line in lines]


def _show(found: dict[str, Any], *, refresh: bool) -> None:
    if not refresh:
        print("\n".join(table(found)), end="\n\n", flush=True)
        return
    size = shutil.get_terminal_size((WIDTH, 24))
    shown = table(found, max(size.columns - 1, 1))[: max(size.lines - 1, 1)]  # the last column and line stay free
    sys.stdout.write(HOME + "".join(f"{line}{REST_OF_LINE}\n" for line in shown) + REST_OF_SCREEN)
    sys.stdout.flush()


def _seconds(text: str) -> float:
    value = float(text)
    if not LEAST_S <= value <= MOST_S:
        raise argparse.ArgumentTypeError(f"{text}: give {LEAST_S:g} to {MOST_S:g} seconds")
    return value
