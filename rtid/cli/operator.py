"""What the commands have in common that talk to a running service: which service, who acts, for how long."""

from __future__ import annotations

import argparse
import os
import re
from pathlib import Path
from typing import Any

from rtid import config
from rtid.service import control_client

SOCKET = Path("/run/rtid/control.sock")  # where systemd has the service make it
UNITS = {"": 1.0, "s": 1.0, "m": 60.0, "h": 3600.0, "d": 86400.0}

_DURATION = re.compile(r"([0-9]{1,9}(?:\.[0-9]{1,6})?)([smhd]?)")


def add_service(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--socket", metavar="PATH", help=f"the service's control socket (default {SOCKET})")
    parser.add_argument("--config", metavar="FILE", help="the service's configuration, which says where its state is")


def add_loop(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("loop", metavar="LOOP", help="the loop")


def add_person(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--by", metavar="NAME", help="who you are (default: your login name)")
    parser.add_argument("--reason", metavar="TEXT", help="why; it stands in the event")


def add_alarm(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--alarm", metavar="NAME", required=True, help="the alarm (rtid guide drift lists them)")
    parser.add_argument("--signal", metavar="S", help="for an alarm of one signal: source.signal")


def add_duration(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--for", dest="for_s", metavar="DURATION", required=True, type=duration, help="seconds, or 30m, 8h, 2d"
    )


def duration(text: str) -> float:
    """Seconds from `90`, `90s`, `30m`, `8h` or `2d`."""
    found = _DURATION.fullmatch(text)
    seconds = float(found[1]) * UNITS[found[2]] if found else 0.0
    if seconds <= 0.0:
        raise argparse.ArgumentTypeError(f"{text!r} is no duration; give seconds, or 30m, 8h, 2d")
    return seconds


def ask(args: argparse.Namespace, do: str, **fields: Any) -> dict[str, Any]:
    """The service's answer. Raises RtidError."""
    path, node = _service(args)
    return control_client.ask(path, {"do": do, "node": node, **fields})


def act(args: argparse.Namespace, do: str, **fields: Any) -> int:
    """Do something to the loop of the command line, and say what was done."""
    answer = ask(args, do, loop=args.loop, by=args.by, **fields)
    print(f"{answer['loop']}: {answer['text']}")
    return 0


def _service(args: argparse.Namespace) -> tuple[Path, str | None]:
    """Its socket, and the node that must be at the other end where a configuration says so."""
    if args.config is None:
        return Path(args.socket or SOCKET), None
    node = config.load(args.config)
    own = Path(node.state_dir) / SOCKET.name
    found = next((path for path in (own, SOCKET) if os.path.exists(path)), own)
    return Path(args.socket or found), node.name
