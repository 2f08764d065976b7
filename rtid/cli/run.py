"""`rtid run`: the service in the foreground; systemd starts this."""

from __future__ import annotations

import argparse
import signal

from rtid import config
from rtid.cli import logs
from rtid.cli.arguments import Subparsers, add_command, add_config
from rtid.service.notify import Notifier
from rtid.service.service import Service


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "run",
        description="The service, in the foreground. It ends in good order on SIGTERM and on Ctrl-C, and reads its\n"
        "configuration anew on SIGHUP: a bad one is refused and the one before goes on.",
        example="rtid run /etc/rtid/node.yaml",
    )
    add_config(parser)


def run(args: argparse.Namespace) -> int:
    service = Service(config.load(args.config), notifier=Notifier(), reread=lambda: config.load(args.config))
    logs.start(tracebacks=args.debug)
    for number in (signal.SIGTERM, signal.SIGINT):
        signal.signal(number, lambda *_: service.stop())
    signal.signal(signal.SIGHUP, lambda *_: service.reload())
    service.run()
    return 0
