"""The service without its sources: readings go in by hand, and it can be killed at any step that touches the disk."""

from __future__ import annotations

import json
import os
from collections.abc import Callable, Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import replace
from pathlib import Path
from typing import Any

from rtid import config
from rtid.intake.queue import ReadingQueue
from rtid.intake.reading import Reading
from rtid.plants.linear import LinearPlant, random_steps, simulate
from rtid.service.outlets import Observer
from rtid.service.parts import Parts
from rtid.settings import Node
from tests.support.plant_lines import PERIOD_S, PLANT, configure

STEPS = ("open", "write", "fsync", "replace", "truncate")


class Killed(BaseException):
    """SIGKILL, as far as one process can play it: nothing catches it."""


def node_in(folder: Path, **changes: Any) -> Node:
    """The node of `plant_lines`, without its source; `changes` are those of its loop."""
    node = config.load(configure(folder))
    belt = replace(node.loops["belt"], **changes)
    return replace(node, sources={}, loops={"belt": belt})


def start(folder: Path, node: Node, *observers: Observer) -> Parts:
    """A service on the state in `folder`, whatever it was before. What is due at start is saved."""
    folder.mkdir(exist_ok=True)
    parts = Parts(folder, node, ReadingQueue(), observers=observers)
    parts.follow(node)
    parts.tend(0.0)
    return parts


def readings(rows: int, *, first: int = 0, plant: LinearPlant = PLANT, seed: int = 1) -> list[Reading]:
    volts = random_steps(rows, low=2.0, high=12.0, hold=(20, 120), seed=seed)
    speed = simulate(plant, volts, period_s=PERIOD_S, seed=seed)
    return [
        Reading("drive", PERIOD_S * (first + k), {"drive.volts": float(volts[k]), "drive.speed": float(speed[k])})
        for k in range(rows)
    ]


def feed(parts: Parts, given: Iterable[Reading]) -> None:
    for reading in given:
        parts.pipeline.feed(reading, reading.time)


def listed(folder: Path) -> list[dict[str, Any]]:
    """The events on the disk."""
    path = folder / "events.jsonl"
    return [json.loads(line) for line in path.read_text(encoding="utf-8").splitlines()] if path.exists() else []


def names(events: Sequence[dict[str, Any]]) -> list[str]:
    """Each event in a word or two."""
    return [e["action"] if "action" in e else f"{e['alarm']} {e['transition']}" for e in events]


@contextmanager
def killed_at(step: int) -> Iterator[None]:
    """The process ends at its step number `step` that touches the disk; a write gets halfway."""
    taken = 0

    def before(name: str, call: Callable[..., Any]) -> Callable[..., Any]:
        def deadly(*arguments: Any, **options: Any) -> Any:
            nonlocal taken
            taken += 1
            if taken < step:
                return call(*arguments, **options)
            if name == "write":
                call(arguments[0], arguments[1][: len(arguments[1]) // 2])
            raise Killed

        return deadly

    real = {name: getattr(os, name) for name in STEPS}
    for name, call in real.items():
        setattr(os, name, before(name, call))
    try:
        yield
    finally:
        for name, call in real.items():
            setattr(os, name, call)


def start_in_spite_of_kills(folder: Path, node: Node) -> Parts:
    """Killed at the first step of its start, then at the second, and so on until it starts."""
    step = 0
    while True:
        step += 1
        try:
            with killed_at(step):
                return start(folder, node)
        except Killed:
            continue
