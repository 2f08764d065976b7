"""Events go to the disk first; neither a full disk nor a bad observer stops what follows."""

from __future__ import annotations

import json
from collections.abc import Mapping
from pathlib import Path
from typing import Any

import pytest

from rtid.report import Report, Transition
from rtid.service.memory import Memory
from rtid.service.outlets import Outlets
from tests.support.disk import full_disk


class Collector:
    """An observer that keeps what it is told."""

    def __init__(self) -> None:
        self.reports: list[Report] = []
        self.events: list[Mapping[str, Any]] = []

    def report(self, report: Report) -> None:
        self.reports.append(report)

    def event(self, payload: Mapping[str, Any], transition: Transition) -> None:
        self.events.append(payload)


class Failing(Collector):
    def report(self, report: Report) -> None:
        raise RuntimeError("no")

    def event(self, payload: Mapping[str, Any], transition: Transition) -> None:
        raise RuntimeError("no")


def report(*transitions: Transition) -> Report:
    return Report(
        loop="belt",
        time_s=1.0,
        stamp=1.0,
        samples=16,
        state="watching",
        health="good",
        since=0.0,
        reason="",
        due=False,
        transitions=transitions,
    )


def drift(text: str = "gain has changed") -> Transition:
    return Transition("plant_drift", "active", "low", text, time_s=1.0, stamp=1.0)


def stored(folder: Path) -> list[dict[str, Any]]:
    return [json.loads(line) for line in (folder / "events.jsonl").read_text().splitlines()]


def test_an_event_is_on_the_disk_when_it_is_told(tmp_path: Path) -> None:
    class Reader(Collector):
        def event(self, payload: Mapping[str, Any], transition: Transition) -> None:
            self.events.append(stored(tmp_path)[-1])

    reader = Reader()
    Outlets(Memory(tmp_path, "node"), observers=[reader]).deliver([report(drift())])
    assert [event["alarm"] for event in reader.events] == ["plant_drift"]


def test_an_observer_that_raises_is_passed_over(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    good = Collector()
    outlets = Outlets(Memory(tmp_path, "node"), observers=[Failing(), good])
    outlets.deliver([report(drift())])
    assert len(good.reports) == len(good.events) == 1
    assert "an observer failed and was passed over: RuntimeError: no" in caplog.text


def test_a_full_disk_raises_the_storage_alarm_once_and_events_go_on(tmp_path: Path) -> None:
    seen = Collector()
    outlets = Outlets(Memory(tmp_path, "node"), observers=[seen])
    with full_disk():
        outlets.deliver([report(drift("first"))])
        outlets.deliver([report(drift("second"))])
    told = [(e["loop"], e["alarm"], e["transition"]) for e in seen.events]
    assert told == [
        ("belt", "plant_drift", "active"),
        ("_node", "storage", "active"),
        ("belt", "plant_drift", "active"),
    ]
    assert "make room on the disk" in seen.events[1]["text"]
    assert [e["sequence"] for e in seen.events] == [1, 2, 3]


def test_the_storage_alarm_clears_when_the_disk_takes_all_that_waited(tmp_path: Path) -> None:
    seen = Collector()
    outlets = Outlets(Memory(tmp_path, "node"), observers=[seen])
    with full_disk():
        outlets.deliver([report(drift())])
    outlets.deliver([report(drift())])
    assert [(e["sequence"], e["alarm"], e["transition"]) for e in stored(tmp_path)] == [
        (1, "plant_drift", "active"),
        (2, "storage", "active"),
        (3, "plant_drift", "active"),
        (4, "storage", "cleared"),
    ]
    assert seen.events[-1]["loop"] == "_node"


def test_a_storage_alarm_that_a_killed_service_left_is_cleared(tmp_path: Path) -> None:
    memory = Memory(tmp_path, "node")
    with full_disk():
        Outlets(memory).deliver([report(drift())])
    memory.events.write()
    seen = Collector()
    outlets = Outlets(Memory(tmp_path, "node"), observers=[seen])
    outlets.watch_storage()
    outlets.watch_storage()
    assert [(e["alarm"], e["transition"]) for e in seen.events] == [("storage", "cleared")]
