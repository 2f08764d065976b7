"""`rtid guide`: the manual that lies in the package, because plant computers have no internet."""

from __future__ import annotations

import argparse
from importlib import resources

from rtid.cli.arguments import Subparsers, add_command
from rtid.errors import UsageError
from rtid.valid_names import one_of

TOPICS = (
    "start",
    "install",
    "configuration",
    "serial",
    "mqtt",
    "topics",
    "model",
    "drift",
    "operation",
    "replay",
    "commands",
    "safety",
    "trouble",
)


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "guide",
        description="The manual, offline. Without TOPIC: the list of topics.",
        example="rtid guide configuration | less",
    )
    parser.add_argument("topic", nargs="?", metavar="TOPIC", help=", ".join(TOPICS))


def run(args: argparse.Namespace) -> int:
    print(_listing() if args.topic is None else page(args.topic), end="")
    return 0


def page(topic: str) -> str:
    """The Markdown of one topic. UsageError when there is none of that name."""
    if topic not in TOPICS:
        raise UsageError(f"no topic {topic!r}; expected {one_of(topic, TOPICS)}")
    return resources.files("rtid.guide").joinpath(f"{topic}.md").read_text(encoding="utf-8")


def _listing() -> str:
    lines = (f"  {topic:<14}{_title(topic)}\n" for topic in TOPICS)
    return "".join(("rtid guide TOPIC prints one of these:\n", *lines))


def _title(topic: str) -> str:
    """The first line of a page is its title in Markdown: `# Title`."""
    return page(topic).split("\n", 1)[0].removeprefix("# ")
