"""`rtid demo`: a simulated motor on a real pseudo-terminal, the real service on it, and in plain words what happens."""

from __future__ import annotations

import argparse
import json
import logging
import shutil
import sys
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

from rtid import config
from rtid.cli import logs
from rtid.cli.arguments import Subparsers, add_command
from rtid.cli.demo_configuration import PERIOD_S, configuration
from rtid.cli.demo_story import Story, comparison
from rtid.cli.demo_watch import RunningService
from rtid.cli.plant_feed import PlantFeed
from rtid.plants.conveyor import Ageing, Conveyor

USUAL_S = 110.0
LEAST_S = 60.0  # below this there is no room for a baseline and a change
MOST_SPEED = 20.0  # beyond it the lines no longer come evenly
BASELINE_SHARE, CHANGE_SHARE, CHANGE_LENGTH_SHARE = 0.27, 0.45, 0.15  # of the whole duration


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "demo",
        description="A simulated conveyor motor drifts; the real service watches it through a pseudo-terminal.\n"
        "Everything in it is invented. Exit code 0 when the drift was seen, else 1.",
        example="rtid demo --seconds 110 --seed 1",
    )
    parser.add_argument(
        "--seconds",
        type=_seconds,
        default=USUAL_S,
        metavar="N",
        help=f"duration, at least {LEAST_S:g} (default {USUAL_S:g})",
    )
    parser.add_argument("--seed", type=int, default=1, metavar="S", help="another seed, another run (default 1)")
    parser.add_argument(
        "--speed", type=_speed, default=1.0, metavar="X", help="run the plant so many times faster than a real one"
    )
    parser.add_argument("--keep", action="store_true", help="leave the folder with configuration, events and snapshot")


def run(args: argparse.Namespace) -> int:
    logs.start(level=logging.ERROR, tracebacks=args.debug)
    ageing = Ageing(CHANGE_SHARE * args.seconds, CHANGE_LENGTH_SHARE * args.seconds)
    conveyor = Conveyor(seed=args.seed, period_s=PERIOD_S, ageing=ageing)
    with _folder(keep=args.keep) as folder, PlantFeed(conveyor.row, period_s=PERIOD_S / args.speed) as feed:
        path = folder / "node.yaml"
        text = configuration(feed.port, state_dir=folder / "state", baseline_s=BASELINE_SHARE * args.seconds)
        path.write_text(text, encoding="utf-8")
        story = Story(sys.stdout, ageing=ageing, rows_wanted=round(BASELINE_SHARE * args.seconds / PERIOD_S))
        story.open(feed.port, folder)
        snapshot = _watch(path, feed, story=story, args=args)
        _show(snapshot, conveyor, path=folder / "conveyor.snapshot.json", kept=args.keep)
    return story.close()


def _watch(path: Path, feed: PlantFeed, *, story: Story, args: argparse.Namespace) -> dict[str, Any]:
    """Run the service on the plant for so many of the plant's seconds; its snapshot at the end."""
    with RunningService(config.load(path)) as service:
        feed.start()
        end = time.monotonic() + args.seconds / args.speed
        while (left := end - time.monotonic()) > 0.0:
            story.tell(service.news(min(left, 0.2)), args.seconds - left * args.speed)
        snapshot = service.snapshot("conveyor", "end of the demo")  # taken behind every line that was read
        story.tell(service.news(0.0), args.seconds)
        return snapshot


def _show(snapshot: dict[str, Any], conveyor: Conveyor, *, path: Path, kept: bool) -> None:
    text = json.dumps(snapshot, indent=2, allow_nan=False)
    path.write_text(text + "\n", encoding="utf-8")
    print(
        f"\nThe snapshot, the model of now (written to {path}"
        f"{'' if kept else ', gone when the demo ends; --keep leaves it'}):\n{text}\n"
    )
    print(comparison(snapshot, conveyor.motor))


@contextmanager
def _folder(*, keep: bool) -> Iterator[Path]:
    folder = Path(tempfile.mkdtemp(prefix="rtid-demo-"))
    try:
        yield folder
    finally:
        if not keep:
            shutil.rmtree(folder, ignore_errors=True)


def _speed(text: str) -> float:
    value = float(text)
    if not 0.1 <= value <= MOST_SPEED:
        raise argparse.ArgumentTypeError(f"{text}: give a factor from 0.1 to {MOST_SPEED:g}")
    return value


def _seconds(text: str) -> float:
    value = float(text)
    if not LEAST_S <= value <= 86400.0:
        raise argparse.ArgumentTypeError(f"{text}: give {LEAST_S:g} seconds or more, there must be room for a baseline")
    return value
