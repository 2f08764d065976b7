"""What `rtid status` is told: one document on the node, its sources and its loops."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from rtid import __version__
from rtid.loop import Loop
from rtid.publish.events import EventLog
from rtid.publish.messages import active_alarm, plain, stamp_text
from rtid.publish.mqtt import MqttPublisher
from rtid.report import Report
from rtid.service.intakes import Intake, origin
from rtid.service.pipeline import Pipeline
from rtid.service.rates import Rate
from rtid.settings import Node

Document = dict[str, Any]


class Board:
    """`look` at every turn of the worker, so that rates and ages are known; `document` when somebody asks.

    `now` is the monotonic clock, `stamp` a label in seconds since 1970.
    """

    def __init__(self, node: Node, events: EventLog, now: float) -> None:
        self._node = node
        self._events = events
        self._start = now
        self._intakes: dict[str, Intake] = {}
        self._publisher: MqttPublisher | None = None
        self._rates: dict[str, Rate] = {}
        self._blocks: dict[str, tuple[int, float]] = {}  # of each loop: how many there were, and since when

    def follow(self, node: Node, intakes: Sequence[Intake], publisher: MqttPublisher | None) -> None:
        """Tell of these from now on."""
        before, self._intakes = self._intakes, {intake.name: intake for intake in intakes}
        stay = {name for name, intake in self._intakes.items() if before.get(name) is intake}
        self._rates = {name: self._rates[name] if name in stay else Rate() for name in self._intakes}
        self._node, self._publisher = node, publisher

    def look(self, pipeline: Pipeline, now: float) -> None:
        for name, intake in self._intakes.items():
            self._rates[name].note(intake.counts.readings, now)
        for loop, count in pipeline.blocks.items():
            if count and self._blocks.get(loop, (0, 0.0))[0] != count:
                self._blocks[loop] = count, now

    def document(self, pipeline: Pipeline, loops: Sequence[str], *, now: float, stamp: float) -> Document:
        return {
            "schema": "rtid/status_reply/1",
            "time": stamp_text(stamp),
            "node": self._node.name,
            "version": __version__,
            "uptime_s": round(now - self._start, 1),
            "state_dir": self._node.state_dir,
            "events": {"sequence": self._events.sequence, "unwritten": len(self._events.unwritten)},
            "broker": self._broker(),
            "sources": {name: self._source(name, now) for name in self._intakes},
            "loops": {name: self._loop(name, pipeline, now=now, stamp=stamp) for name in loops},
        }

    def _broker(self) -> Document | None:
        if self._node.broker is None or self._publisher is None:
            return None
        counts = self._publisher.counts
        return {
            "address": self._node.broker.address,
            "connected": self._publisher.connected,
            "connections": counts.connections,
            "sent": counts.sent,
            "failed": counts.failed,
            "dropped": counts.dropped,
            "held": counts.held,
        }

    def _source(self, name: str, now: float) -> Document:
        intake = self._intakes[name]
        counts = intake.counts
        return {
            "from": origin(self._node.sources[name]),
            "connected": intake.connected,
            "rate_per_s": _rounded(self._rates[name].per_s(counts.readings, now)),
            "messages": counts.messages,
            "readings": counts.readings,
            "dropped": counts.dropped,
            "retained": counts.retained,
            "reconnects": counts.reconnects,
            "rejected": dict(counts.rejected),
            "first_rejected": dict(counts.first_rejected),
            "last_message_age_s": _age(counts.last_arrival, now),
            "skew_s": {topic: round(skew, 4) for topic, skew in intake.skew_s().items()},
        }

    def _loop(self, name: str, pipeline: Pipeline, *, now: float, stamp: float) -> Document:
        loop, report = pipeline.loops[name], pipeline.report(name, stamp)
        blocks, since = self._blocks.get(name, (0, None))
        return {
            **_judgement(report, stamp),
            **_deeds(loop),
            "progress": loop.progress or None,
            "samples": report.samples,
            "blocks": blocks,
            "last_block_age_s": _age(since, now),
            "rejected": _counted(pipeline.grids[name].rejected),
            "quantities": plain(report.quantities),
        }


def baselines(loop: Loop) -> list[Document]:
    """All baselines of a loop, in the order of acceptance."""
    return [
        {
            "id": accepted.identity,
            "time": stamp_text(accepted.baseline.stamp),
            "in_force": accepted.identity == loop.baseline,
            "by": accepted.by or None,
            "because": accepted.because or None,
            "reason": accepted.reason or None,
            "quantities": plain(accepted.quantities),
        }
        for accepted in loop.baselines
    ]


def _judgement(report: Report, stamp: float) -> Document:
    drift = report.drift
    last = drift.last_informative
    return {
        "state": report.state,
        "health": report.health,
        "since": stamp_text(report.since),
        "reason": report.reason,
        "drift_ratio": plain(drift.ratio),
        "worst_quantity": drift.worst_quantity,
        "change_pct": plain(drift.change_pct),
        "low_pct": plain(drift.low_pct),
        "high_pct": plain(drift.high_pct),
        "detectable_gain_pct": plain(drift.detectable_gain_pct),
        "last_informative": None if last is None else stamp_text(last),
        "last_informative_age_s": _age(last, stamp),
        "alarms": [active_alarm(alarm) for alarm in report.alarms],
    }


def _deeds(loop: Loop) -> Document:
    """What people have done that still stands."""
    held = loop.hold
    return {
        "baseline": loop.baseline,
        "hold": None if held is None else {"by": held[0], "until": stamp_text(held[1])},
        "shelved": [
            {"alarm": alarm, "signal": signal, "until": stamp_text(until)} for alarm, signal, until in loop.shelved
        ],
    }


def _counted(counts: Mapping[str, int]) -> dict[str, int]:
    return {kind: count for kind, count in counts.items() if count}


def _age(then: float | None, now: float) -> float | None:
    return None if then is None else _rounded(max(0.0, now - then))


def _rounded(value: float | None) -> float | None:
    return None if value is None else round(value, 2)
