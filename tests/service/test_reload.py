"""SIGHUP: a good configuration is followed without harm to what is as before, a bad one is refused in one line."""

from __future__ import annotations

import json
import logging
import os
import re
import signal
import threading
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest

from rtid import config
from rtid.report import Report, Transition
from rtid.service.service import Service
from tests.support.broker import Broker, Listener, Message
from tests.support.plant_lines import configure, plant_rows
from tests.support.process import RunningRtid
from tests.support.pty import PtyDevice
from tests.support.wait import wait_until

TAKEN, REFUSED = "the configuration is taken over", "the configuration is not taken over"
HEAD = 2600  # rows before the reload: the baseline is known
LINES = plant_rows(3400)


class Watcher:
    """An observer that keeps reports and events."""

    def __init__(self) -> None:
        self.reports: list[Report] = []
        self.events: list[str] = []

    def report(self, report: Report) -> None:
        self.reports.append(report)

    def event(self, payload: Mapping[str, Any], transition: Transition) -> None:
        self.events.append(str(transition.action or f"{transition.alarm} {transition.transition}"))

    def time_s(self, loop: str = "belt") -> float:
        return max((report.time_s for report in self.reports if report.loop == loop), default=-1.0)


@pytest.fixture(autouse=True)
def whole_log(caplog: pytest.LogCaptureFixture) -> None:
    caplog.set_level(logging.INFO)


@contextmanager
def serving(path: Path, watcher: Watcher, caplog: pytest.LogCaptureFixture) -> Iterator[Service]:
    service = Service(config.load(path), observers=[watcher], reread=lambda: config.load(path))
    running = threading.Thread(target=service.run)
    opened = caplog.text.count("is open")
    running.start()
    try:
        wait_until(lambda: caplog.text.count("is open") > opened, what="an open port")
        yield service
    finally:
        service.stop()
        running.join()


def reload(service: Service, caplog: pytest.LogCaptureFixture, answer: str = TAKEN) -> None:
    before = caplog.text.count(answer)
    service.reload()
    wait_until(lambda: caplog.text.count(answer) > before, what=answer)


def edit(path: Path, *changes: tuple[str, str]) -> None:
    text = path.read_text()
    for old, new in changes:
        assert old in text, old
        text = text.replace(old, new, 1)
    path.write_text(text)


def digits(reports: list[Report]) -> list[tuple[Any, ...]]:
    return [(r.time_s, r.state, r.quantities, r.drift.ratio, r.samples) for r in reports if r.due]


def run(
    folder: Path, caplog: pytest.LogCaptureFixture, between: Callable[[Service, Path], None] = lambda *_: None
) -> Watcher:
    """HEAD rows, something, the other rows."""
    folder.mkdir()
    watcher = Watcher()
    with PtyDevice(folder / "board") as board:
        path = configure(folder, board.port)
        with serving(path, watcher, caplog) as service:
            board.stream([b"half a line", *LINES[:HEAD]])
            wait_until(lambda: watcher.time_s() > (HEAD - 40) / 100.0, 30.0, what="the first rows")
            between(service, path)
            board.stream(LINES[HEAD:])
            wait_until(lambda: watcher.time_s() > (len(LINES) - 40) / 100.0, 30.0, what="the last row")
    return watcher


SECOND = """\
  press:
    inputs: [drive.volts]
    output: drive.speed
    period_s: 0.01
    model: {order: 1}
"""


def test_a_loop_that_is_as_before_goes_on_to_the_last_digit(
    tmp_path: Path, caplog: pytest.LogCaptureFixture
) -> None:
    def follow_another(service: Service, path: Path) -> None:
        reload(service, caplog)
        path.write_text(path.read_text() + SECOND)
        reload(service, caplog)

    quiet, reloaded = run(tmp_path / "quiet", caplog), run(tmp_path / "reloaded", caplog, follow_another)
    belt = [report for report in reloaded.reports if report.loop == "belt"]
    assert digits(belt) == digits(quiet.reports)
    assert reloaded.events == quiet.events == ["baseline"]
    assert reloaded.time_s("press") > 0.0
    assert caplog.text.count("is open") == 2  # each board once


def test_a_changed_loop_keeps_what_it_knows_and_another_plant_learns_anew(
    tmp_path: Path, caplog: pytest.LogCaptureFixture
) -> None:
    def change(service: Service, path: Path) -> None:
        edit(path, ("    memory_s: 20", "    memory_s: 30\n    tolerance: {gain_pct: 25}"))
        reload(service, caplog)
        assert service.snapshot("belt", "a look")["baseline"]["id"] == "belt-1"
        edit(path, ("order: 2", "order: 1"))
        reload(service, caplog)
        assert service.snapshot("belt", "a look")["baseline"] is None

    watcher = run(tmp_path / "run", caplog, change)
    assert watcher.events[:2] == ["baseline", "learns_anew"]
    assert any((tmp_path / "run" / "state" / "loops").glob("belt.*.old.json"))
    assert watcher.reports[-1].state == "learning"


def test_a_loop_that_is_taken_out_and_comes_back_goes_on(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    def take_out(service: Service, path: Path) -> None:
        whole = path.read_text()
        edit(path, ("  belt:", "  press:"))
        reload(service, caplog)
        assert "no longer in the configuration: belt" in caplog.text
        path.write_text(whole)
        reload(service, caplog)
        assert service.snapshot("belt", "a look")["baseline"]["id"] == "belt-1"

    assert run(tmp_path / "run", caplog, take_out).events.count("baseline") == 1


def test_sources_are_started_stopped_and_moved(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    watcher = Watcher()
    with PtyDevice(tmp_path / "one") as one, PtyDevice(tmp_path / "two") as two:
        path = configure(tmp_path, one.port)
        with serving(path, watcher, caplog) as service:
            edit(path, (f"port: {one.port}", f"port: {two.port}"))
            reload(service, caplog)
            wait_until(lambda: caplog.text.count("is open") == 2, what="the second port open")
            two.stream(plant_rows(200))
            wait_until(lambda: watcher.time_s() > 1.5, what="rows from the second port")
            names = {thread.name for thread in threading.enumerate()}
            assert [name for name in names if name.startswith("intake-")] == ["intake-drive"]


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (("order: 2", "order: 7"), r"node\.yaml:\d+: .*order"),
        (("belt:", "belt: ["), r"node\.yaml:\d+"),
        (("node: test-node", "node: other-node"), "node is 'other-node' now and was 'test-node'.*needs a restart"),
        (("/state\n", "/elsewhere\n"), "state_dir is .*needs a restart"),
        (
            ("sources:", "broker: {host: 127.0.0.1, username: a, password_file: /no/such}\nsources:"),
            "/no/such",
        ),
    ],
)
def test_a_bad_configuration_is_refused_in_one_line_and_the_service_goes_on(
    tmp_path: Path, caplog: pytest.LogCaptureFixture, change: tuple[str, str], words: str
) -> None:
    watcher = Watcher()
    with PtyDevice(tmp_path / "board") as board:
        path = configure(tmp_path, board.port)
        with serving(path, watcher, caplog) as service:
            edit(path, change)
            reload(service, caplog, REFUSED)
            board.stream(plant_rows(200))
            wait_until(lambda: watcher.time_s() > 1.5, what="rows after the refusal")
            (said,) = [record for record in caplog.records if REFUSED in record.getMessage()]
            assert re.search(words, said.getMessage())
            assert "\n" not in said.getMessage()
            assert said.levelname == "ERROR"
            assert caplog.text.count("is open") == 1


def shows(topic: str, test: Callable[[dict[str, Any]], object]) -> Callable[[Message], bool]:
    return lambda message: message.topic == topic and bool(message.payload and test(json.loads(message.payload)))


def test_sighup_in_the_real_process_with_a_good_and_a_bad_file_and_another_broker(
    tmp_path: Path, mqtt5_broker: Broker
) -> None:
    health, status = "rtid/test-node/belt/health", "rtid/test-node/status"
    with Broker() as second, PtyDevice(tmp_path / "board") as board:
        path = configure(tmp_path, board.port, broker=mqtt5_broker.port)
        with RunningRtid("run", path) as service, Listener(mqtt5_broker.port, "rtid/#") as first:
            service.wait_for_line("is open")
            board.stream(plant_rows(300))
            first.wait_for(shows(health, lambda payload: payload["state"] == "learning"))
            good = path.read_text()
            path.write_text("node: [")
            os.kill(service.pid, signal.SIGHUP)
            service.wait_for_line(REFUSED)
            path.write_text(good.replace(f"port: {mqtt5_broker.port}", f"port: {second.port}"))
            os.kill(service.pid, signal.SIGHUP)
            service.wait_for_line(TAKEN)
            first.wait_for(shows(status, lambda payload: payload == {"state": "offline"}))
            with Listener(second.port, "rtid/#") as other:
                other.wait_for(shows(status, lambda payload: payload["state"] == "online"), 20.0)
                other.wait_for(shows(health, lambda payload: payload["state"] == "learning"), 20.0)
            assert service.end(signal.SIGTERM) == 0
    assert not any("Traceback" in line for line in service.stderr)


def test_a_loop_that_is_taken_out_leaves_nothing_at_the_broker(tmp_path: Path, mqtt5_broker: Broker) -> None:
    with PtyDevice(tmp_path / "board") as board:
        path = configure(tmp_path, board.port, broker=mqtt5_broker.port)
        path.write_text(path.read_text() + SECOND)
        with RunningRtid("run", path) as service, Listener(mqtt5_broker.port, "rtid/#") as listener:
            service.wait_for_line("is open")
            board.stream(plant_rows(300))
            listener.wait_for(shows("rtid/test-node/press/health", lambda payload: payload["state"] == "learning"))
            path.write_text(path.read_text().replace(SECOND, ""))
            os.kill(service.pid, signal.SIGHUP)
            listener.wait_for(lambda m: (m.topic, m.payload) == ("rtid/test-node/press/health", b""))
            listener.wait_for(shows("rtid/test-node/status", lambda payload: payload["loops"] == ["belt"]))
            assert service.end(signal.SIGTERM) == 0
