"""`rtid listen`: the decoded readings of the sources as they come, and at the end what was lost and why."""

from __future__ import annotations

import argparse
import json
import os
import sys
import time
from collections.abc import Sequence
from typing import Any

from rtid import config
from rtid.cli import logs
from rtid.cli.arguments import Subparsers, add_command, add_config, add_json
from rtid.errors import Unavailable, UsageError
from rtid.intake.queue import ReadingQueue
from rtid.intake.reading import Reading
from rtid.intake.serial_port import reset_warning
from rtid.service.intakes import Intake, make_intake, origin
from rtid.settings import Node, Source
from rtid.valid_names import one_of

WAIT_S = 0.1
TERMINAL_GAP_S = 0.1  # on a terminal at most ten lines a second and source: more cannot be read


def add(subparsers: Subparsers) -> None:
    parser = add_command(
        subparsers,
        "listen",
        description="Show the decoded readings of the sources, then rate, skew, losses and decoding errors.\n"
        "Ends with Ctrl-C or after --seconds. Nothing is learnt, stored or published.",
        example="rtid listen node.yaml drive --seconds 10",
    )
    add_config(parser)
    parser.add_argument("source", metavar="SOURCE", nargs="?", help="one source only; without it all of them")
    parser.add_argument("--seconds", type=_seconds, metavar="N", help="stop after so long")
    add_json(parser)


def run(args: argparse.Namespace) -> int:
    node = config.load(args.config)
    sources = _chosen(node, args.source)
    logs.start(tracebacks=args.debug)
    for source in sources:
        _announce(source)
    queue = ReadingQueue()
    intakes = [
        make_intake(source, queue, broker=node.broker, client_id=f"rtid-listen-{os.getpid()}-{source.name}")
        for source in sources
    ]
    tally = Tally(units={s.name: s.unit for source in sources for s in source.signals}, lines=not args.json)
    _listen(intakes, queue, tally=tally, seconds=args.seconds)
    summary = {intake.name: _summary(intake, tally) for intake in intakes}
    print(
        json.dumps({"schema": "rtid/listen/1", "sources": summary}, allow_nan=False)
        if args.json
        else "\n".join(_plain(name, found) for name, found in summary.items())
    )
    silent = [name for name, found in summary.items() if not found["readings"]]
    if silent:
        raise Unavailable(f"no reading from {', '.join(silent)}; check the cable, the port or topic, and the decoding")
    return 0


class Tally:
    """Counts the readings of each source and prints them, thinned out on a terminal."""

    def __init__(self, *, units: dict[str, str], lines: bool) -> None:
        self._units = units
        self._lines = lines
        self._gap_s = TERMINAL_GAP_S if sys.stdout.isatty() else 0.0
        self._next: dict[str, float] = {}
        self._first: dict[str, float] = {}
        self._last: dict[str, float] = {}
        self._count: dict[str, int] = {}

    def take(self, reading: Reading) -> None:
        name = reading.source
        self._count[name] = self._count.get(name, 0) + 1
        self._first.setdefault(name, reading.arrival)
        self._last[name] = reading.arrival
        if self._lines and reading.arrival >= self._next.get(name, 0.0):
            self._next[name] = reading.arrival + self._gap_s
            print(self._line(reading), flush=True)

    def count(self, name: str) -> int:
        return self._count.get(name, 0)

    def rate(self, name: str) -> float | None:
        """Readings per second between the first and the last one; None below two of them."""
        span = self._last.get(name, 0.0) - self._first.get(name, 0.0)
        return (self._count[name] - 1) / span if span > 0.0 else None

    def _line(self, reading: Reading) -> str:
        values = "  ".join(
            f"{name.partition('.')[2]} {value:.6g} {self._units.get(name, '')}".rstrip()
            for name, value in reading.values.items()
        )
        return f"{reading.source}  {reading.time:.3f} s  {values}"


def _listen(intakes: Sequence[Intake], queue: ReadingQueue, *, tally: Tally, seconds: float | None) -> None:
    end = None if seconds is None else time.monotonic() + seconds
    for intake in intakes:
        intake.start()
    try:
        while end is None or time.monotonic() < end:
            for item in queue.get(WAIT_S):
                if isinstance(item, Reading):
                    tally.take(item)
    except KeyboardInterrupt:
        print(file=sys.stderr)
    finally:
        for intake in intakes:
            intake.stop()


def _chosen(node: Node, name: str | None) -> list[Source]:
    if name is None:
        return list(node.sources.values())
    if name not in node.sources:
        raise UsageError(f"no source {name!r}; expected {one_of(name, node.sources)}")
    return [node.sources[name]]


def _announce(source: Source) -> None:
    warning = f"; {reset_warning(source)}" if source.serial is not None else ""
    print(f"listening to {source.name}: {origin(source)}{warning}", file=sys.stderr)


def _summary(intake: Intake, tally: Tally) -> dict[str, Any]:
    counts = intake.counts
    return {
        "messages": counts.messages,
        "readings": tally.count(intake.name),
        "rate_per_s": tally.rate(intake.name),
        "skew_s": intake.skew_s(),
        "dropped": counts.dropped,
        "retained": counts.retained,
        "reconnects": counts.reconnects,
        "rejected": {
            kind: {"count": count, "first": counts.first_rejected[kind]} for kind, count in counts.rejected.items()
        },
    }


def _plain(name: str, found: dict[str, Any]) -> str:
    rate = f", {found['rate_per_s']:.4g} a second" if found["rate_per_s"] is not None else ""
    lines = [f"{name}: {found['readings']} readings from {found['messages']} messages{rate}"]
    lines += [f"  {topic} comes {seconds:+.3f} s after the first topic" for topic, seconds in found["skew_s"].items()]
    lines += [f"  {found[key]} {what}" for key, what in _LOSSES.items() if found[key]]
    lines += [f"  {bad['count']} rejected, {kind}: {bad['first']}" for kind, bad in found["rejected"].items()]
    return "\n".join(lines)


_LOSSES = {
    "dropped": "dropped: the queue was full",
    "retained": "kept by the broker from before: never samples",
    "reconnects": "times the connection came back",
}


def _seconds(text: str) -> float:
    value = float(text)
    if not 0.0 < value < 1e9:
        raise argparse.ArgumentTypeError(f"{text} is not a number of seconds above zero")
    return value
