"""The real service as a process, on a real pseudo-terminal and a real broker."""

from __future__ import annotations

import json
import signal
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest

from tests.support.broker import Broker, Listener, Message, free_port
from tests.support.plant_lines import PLANT, configure, plant_rows
from tests.support.process import RunningRtid, rtid
from tests.support.pty import PtyDevice
from tests.support.wait import wait_until

STATUS, MODEL, HEALTH = "rtid/test-node/status", "rtid/test-node/belt/model", "rtid/test-node/belt/health"
OFFLINE = {"state": "offline"}


def shows(topic: str, test: Callable[[dict[str, Any]], object]) -> Callable[[Message], bool]:
    """A message on this topic whose JSON passes the test."""
    return lambda message: message.topic == topic and bool(message.payload and test(json.loads(message.payload)))


def samples_above(count: int) -> Callable[[Message], bool]:
    return shows(MODEL, lambda model: model["samples"] > count)


def test_the_gain_of_a_known_plant_is_published_within_three_percent(tmp_path: Path, mqtt5_broker: Broker) -> None:
    with PtyDevice(tmp_path / "board") as board, Listener(mqtt5_broker.port, "rtid/#") as listener:
        path = configure(tmp_path, board.port, broker=mqtt5_broker.port)
        with RunningRtid("run", path) as service:
            listener.wait_for(shows(STATUS, lambda status: status["state"] == "online"), 20.0)
            service.wait_for_line("is open")
            board.stream(plant_rows(6000))
            model = json.loads(listener.wait_for(samples_above(5000), 30.0).payload)
            assert model["state"] == "watching"
            gain = model["quantities"]["gain"]
            assert gain["value"] == pytest.approx(PLANT.gain, rel=0.03)
            assert gain["low"] < gain["value"] < gain["high"]
            assert service.end(signal.SIGTERM) == 0
        assert json.loads(listener.on(STATUS)[-1].payload) == OFFLINE


def test_it_goes_on_after_garbage_a_pulled_port_and_a_restarted_broker(tmp_path: Path, mqtt5_broker: Broker) -> None:
    with PtyDevice(tmp_path / "board") as board:
        path = configure(tmp_path, board.port, broker=mqtt5_broker.port)
        with RunningRtid("run", path) as service:
            service.wait_for_line("is open")
            with Listener(mqtt5_broker.port, "rtid/#") as listener:
                board.stream(plant_rows(1500))
                listener.wait_for(samples_above(1000), 20.0)
                board.stream([b"\x00\xff\xfe*7F", b"1,2,3*00", b"x" * 9000, b"{}", b""])
                board.stream(plant_rows(1500, first=1500, seed=2))
                listener.wait_for(samples_above(2500), 20.0)
            board.pull()
            mqtt5_broker.restart()

            service.wait_for_line("no such port")
            board.plug()
            wait_until(lambda: sum("is open" in line for line in service.stderr) == 2, 15.0, what="an open port")
            board.stream(plant_rows(1500, first=3000, seed=3))
            with Listener(mqtt5_broker.port, "rtid/#") as listener:
                listener.wait_for(shows(STATUS, lambda status: status["state"] == "online"), 20.0)
                listener.wait_for(samples_above(3500), 20.0)
            assert service.end(signal.SIGINT) == 0
    assert not any("Traceback" in line for line in service.stderr)


def test_a_killed_service_leaves_its_will(tmp_path: Path, mqtt5_broker: Broker) -> None:
    path = configure(tmp_path, broker=mqtt5_broker.port)
    with Listener(mqtt5_broker.port, "rtid/#") as listener, RunningRtid("run", path) as service:
        listener.wait_for(shows(STATUS, lambda status: status["state"] == "online"), 20.0)
        service.end(signal.SIGKILL)
        listener.wait_for(shows(STATUS, lambda status: status == OFFLINE))


def test_it_starts_without_broker_and_port_says_so_and_refuses_a_second_one(tmp_path: Path) -> None:
    port = free_port()
    path = configure(tmp_path, tmp_path / "board", broker=port)
    with RunningRtid("run", path) as service:
        service.wait_for_line("no such port")
        second = rtid("run", path)
        assert second.returncode == 69
        assert second.stderr.count("\n") == 1
        assert "another rtid service holds" in second.stderr
        with Broker(port), Listener(port, "rtid/#") as listener:
            listener.wait_for(shows(STATUS, lambda status: status["state"] == "online"), 20.0)
            assert service.end(signal.SIGTERM) == 0
    for words in (
        "rtid 0.",
        "node test-node",
        "source drive: serial port",
        "loop belt:",
        "state in",
        "broker 127.0.0.1",
    ):
        assert any(words in line for line in service.stderr)


def test_data_that_stop_make_the_loop_stale(tmp_path: Path, mqtt5_broker: Broker) -> None:
    with PtyDevice(tmp_path / "board") as board, Listener(mqtt5_broker.port, "rtid/#") as listener:
        path = configure(tmp_path, board.port, broker=mqtt5_broker.port, stale_after_s=1.0)
        with RunningRtid("run", path) as service:
            service.wait_for_line("is open")
            board.stream(plant_rows(500))
            listener.wait_for(shows(HEALTH, lambda health: health["state"] == "learning"))
            stale = json.loads(listener.wait_for(shows(HEALTH, lambda health: health["state"] == "stale")).payload)
            assert stale["health"] != "good"


def test_the_service_stays_small(tmp_path: Path) -> None:
    """Resident memory below 60 MB with one loop that has learnt its baseline."""
    with PtyDevice(tmp_path / "board") as board, RunningRtid("run", configure(tmp_path, board.port)) as service:
        service.wait_for_line("is open")
        board.stream(plant_rows(4000))
        status = Path(f"/proc/{service.pid}/status").read_text()
        resident_kib = next(int(line.split()[1]) for line in status.splitlines() if line.startswith("VmRSS:"))
        assert resident_kib < 60_000
