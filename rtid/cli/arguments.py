"""What the command lines have in common: the look of a command, its configuration file, its output as JSON."""

from __future__ import annotations

import argparse
from typing import TypeAlias

Subparsers: TypeAlias = "argparse._SubParsersAction[argparse.ArgumentParser]"


def add_command(subparsers: Subparsers, name: str, *, description: str, example: str) -> argparse.ArgumentParser:
    return subparsers.add_parser(name, description=description, epilog=f"example:\n  {example}")


def add_config(parser: argparse.ArgumentParser, *, nargs: str | None = None) -> None:
    parser.add_argument("config", metavar="CONFIG", nargs=nargs, help="the configuration (YAML)")


def add_json(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--json", action="store_true", help="print one JSON document and nothing else")
