"""`rtid run`: the service in the foreground; systemd starts this."""

from __future__ import annotations

import argparse
import signal
from typing import TYPE_CHECKING

from rtid import config
from rtid.cli import logs
from rtid.service.service import Service

if TYPE_CHECKING:
    Subparsers = argparse._SubParsersAction[argparse.ArgumentParser]


def add(subparsers: Subparsers) -> None:
    parser = subparsers.add_parser(
        "run",
        description="The service, in the foreground. It ends in good order on SIGTERM and on Ctrl-C.",
        epilog="example:\n  rtid run /etc/rtid/node.yaml",
    )
    parser.add_argument("config", metavar="CONFIG", help="the configuration (YAML)")


def run(args: argparse.Namespace) -> int:
    service = Service(config.load(args.config))
    logs.start(tracebacks=args.debug)
    for number in (signal.SIGTERM, signal.SIGINT):
        signal.signal(number, lambda *_: service.stop())
    service.run()
    return 0
