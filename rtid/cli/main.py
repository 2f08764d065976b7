"""The command line: finds the command, and turns whatever goes wrong into one line on stderr and a sysexits code."""

from __future__ import annotations

import argparse
import importlib
import logging
import os
import sys
import traceback
from collections.abc import Sequence
from typing import Any, NoReturn

from rtid import __doc__ as purpose
from rtid import __version__
from rtid.cli import logs
from rtid.errors import RtidError, UsageError
from rtid.valid_names import one_of

COMMANDS: dict[str, str] = {
    "demo": "a simulated plant that drifts, watched by the real service: two minutes, no hardware",
    "check": "read a configuration and say what would run",
    "listen": "show the decoded readings of the sources, for commissioning",
    "run": "the service, in the foreground",
    "replay": "the same pipeline over recorded data, as fast as it goes",
    "status": "how the running service is, its sources and its loops",
    "watch": "the loops of the running service, live in the terminal",
    "snapshot": "the model of now, with its validation, as a file",
    "rebaseline": "learn a new baseline, list the old ones, or restore one",
    "hold": "hold a loop for a while: nothing is learnt or judged",
    "resume": "end a hold before its time",
    "ack": "acknowledge an alarm",
    "shelve": "hear nothing of an alarm for a while",
    "unshelve": "hear of a shelved alarm again before its time",
    "note": "leave a remark in the list of events",
    "guide": "the manual, offline",
}
INTERNAL_ERROR = 70
INTERRUPTED = 130
BLAS_THREADS = ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS")


class Parser(argparse.ArgumentParser):
    """Errors are one line; help keeps the line breaks of its example."""

    def __init__(self, **options: Any) -> None:
        ours: dict[str, Any] = {"formatter_class": argparse.RawDescriptionHelpFormatter, "allow_abbrev": False}
        super().__init__(**(ours | options))

    def error(self, message: str) -> NoReturn:
        raise UsageError(f"{message}; see '{self.prog} --help'")


def entry() -> int:
    """The installed command. One BLAS thread: matrices here are small, and spinning threads starve the service."""
    for name in BLAS_THREADS:
        os.environ.setdefault(name, "1")
    return main()


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command line and return its exit code; never raises for what a user can do."""
    arguments = list(sys.argv[1:] if argv is None else argv)
    try:
        status = _dispatch(arguments)
        sys.stdout.flush()
    except KeyboardInterrupt:
        return INTERRUPTED
    except BrokenPipeError:
        return _reader_left()
    except Exception as error:
        return _explain(error, debug="--debug" in arguments)
    return status


def _dispatch(arguments: list[str]) -> int:
    command = next((word for word in arguments if not word.startswith("-")), None)
    if command is not None and command not in COMMANDS:
        raise UsageError(f"no command {command!r}; expected {one_of(command, COMMANDS)}")
    try:
        return _run(command, arguments)
    except SystemExit as leaving:  # argparse, after --help and --version
        return int(leaving.code or 0)


def _run(command: str | None, arguments: list[str]) -> int:
    parser = _top_parser()
    if command is None:
        parser.parse_args(arguments)
        parser.error(f"no command given: {', '.join(COMMANDS)}")
    module = importlib.import_module(f"rtid.cli.{command}")  # only this one: the others' packages stay unloaded
    subparsers = parser.add_subparsers(dest="command", prog=parser.prog)
    module.add(subparsers)
    chosen = subparsers.choices[command]
    _add_debug(chosen, default=argparse.SUPPRESS)
    args, unknown = parser.parse_known_args(arguments)
    if unknown:
        chosen.error(f"unknown argument: {' '.join(unknown)}")
    return int(module.run(args))


def _top_parser() -> Parser:
    lines = "\n".join(f"  {name:<10} {what}" for name, what in COMMANDS.items())
    parser = Parser(
        prog="rtid",
        usage="rtid [-h] [--version] [--debug] COMMAND ...",
        description=f"{purpose}\n\ncommands:\n{lines}",
        epilog="example:\n  rtid check plant.yaml",
    )
    parser.add_argument("--version", action="version", version=f"rtid {__version__}")
    _add_debug(parser, default=False)
    return parser


def _add_debug(parser: argparse.ArgumentParser, *, default: Any) -> None:
    parser.add_argument("--debug", action="store_true", default=default, help="show the traceback of an error")


def _reader_left() -> int:
    """The reader of stdout closed it (`| head`): nothing is wrong, and the flush at exit must find an open file."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    return 0


def _explain(error: Exception, *, debug: bool) -> int:
    if debug:
        traceback.print_exception(error)
    text = " ".join(str(error).split())
    start = logs.severity(logging.ERROR) if logs.in_journal(sys.stderr) else ""
    if isinstance(error, RtidError):
        print(f"{start}rtid: {text}", file=sys.stderr)
        return error.exit_code
    mend = "" if debug else "; start again with --debug to see where"
    print(f"{start}rtid: unexpected {type(error).__name__}: {text}{mend}", file=sys.stderr)
    return INTERNAL_ERROR
