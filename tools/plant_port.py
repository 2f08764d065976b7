"""A simulated conveyor motor on a pseudo-terminal, to try an installation without hardware.

    python tools/plant_port.py --link /tmp/plant --change-after 120

It prints the name of the port and a configuration for it, and sends 100 lines a second until Ctrl-C.
"""

from __future__ import annotations

import argparse
import contextlib
import os
import signal
import sys
import threading
from collections.abc import Iterator

from rtid.cli.demo_configuration import PERIOD_S, configuration
from rtid.cli.plant_feed import PlantFeed
from rtid.plants.conveyor import Ageing, Conveyor


def main() -> int:
    args = _arguments()
    stopping = threading.Event()
    for number in (signal.SIGTERM, signal.SIGINT):
        signal.signal(number, lambda *_: stopping.set())
    ageing = None if args.change_after is None else Ageing(args.change_after, args.change_over)
    conveyor = Conveyor(seed=args.seed, period_s=PERIOD_S, ageing=ageing)
    with PlantFeed(conveyor.row, period_s=PERIOD_S) as feed, _linked(feed.port, args.link) as port:
        print(
            f"# the plant talks on {port}\n{configuration(port, state_dir='state', baseline_s=60.0)}",
            end="",
            flush=True,
        )
        feed.start()
        stopping.wait()
    return 0


def _arguments() -> argparse.Namespace:
    parser = argparse.ArgumentParser(description="A simulated conveyor motor on a pseudo-terminal.")
    parser.add_argument("--link", metavar="PATH", help="a symbolic link to the port, a name that does not move")
    parser.add_argument("--seed", type=int, default=1, metavar="S")
    parser.add_argument(
        "--change-after", type=float, metavar="SECONDS", help="then bearing friction and winding heat rise"
    )
    parser.add_argument("--change-over", type=float, default=15.0, metavar="SECONDS", help="how long the change takes")
    return parser.parse_args()


@contextlib.contextmanager
def _linked(port: str, link: str | None) -> Iterator[str]:
    if link is None:
        yield port
        return
    try:
        os.symlink(port, link)
    except OSError as error:
        sys.exit(f"plant_port: {link}: cannot be made: {error.strerror}; choose another --link")
    try:
        yield link
    finally:
        os.unlink(link)


if __name__ == "__main__":
    sys.exit(main())
