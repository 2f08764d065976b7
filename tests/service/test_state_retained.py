"""After a start the broker keeps the restored truth, whatever it kept before."""

from __future__ import annotations

import json
import signal
from collections.abc import Callable
from pathlib import Path
from typing import Any

from tests.support.broker import Broker, Listener, Message, publish
from tests.support.plant_lines import configure, plant_rows
from tests.support.process import RunningRtid
from tests.support.pty import PtyDevice

ROOT = "rtid/test-node"
HEALTH, MODEL, GAP = f"{ROOT}/belt/health", f"{ROOT}/belt/model", f"{ROOT}/belt/alarm/data_gap"


def shows(topic: str, test: Callable[[dict[str, Any]], object]) -> Callable[[Message], bool]:
    return lambda message: message.topic == topic and bool(message.payload and test(json.loads(message.payload)))


def test_a_killed_service_comes_back_with_its_numbers_and_alarms_and_is_not_good(
    tmp_path: Path, mqtt5_broker: Broker
) -> None:
    with PtyDevice(tmp_path / "board") as board:
        path = configure(tmp_path, board.port, broker=mqtt5_broker.port)
        path.write_text(path.read_text() + "    alarms: {data_gap: {latching: true}}\n")
        with RunningRtid("run", path) as service, Listener(mqtt5_broker.port, "rtid/#") as listener:
            service.wait_for_line("is open")
            board.stream([*plant_rows(2600), *plant_rows(400, first=2800)])
            before = json.loads(listener.wait_for(shows(GAP, lambda event: event["transition"] == "active")).payload)
            service.end(signal.SIGKILL)
        for topic in (HEALTH, MODEL, GAP, f"{ROOT}/_node/alarm/storage"):
            publish(mqtt5_broker.port, topic, "{}", retain=True)
        with RunningRtid("run", path) as service, Listener(mqtt5_broker.port, "rtid/#") as listener:
            health = json.loads(listener.wait_for(shows(HEALTH, lambda payload: payload.get("state"))).payload)
            assert (health["state"], health["health"]) == ("waiting", "function_check")
            assert "restarted" in health["reason"]
            assert [alarm["alarm"] for alarm in health["alarms"]] == ["data_gap"]
            model = json.loads(listener.wait_for(shows(MODEL, lambda payload: payload.get("state"))).payload)
            assert model["state"] == "waiting"
            assert model["quantities"]["gain"]["value"] is not None
            assert json.loads(listener.wait_for(shows(GAP, lambda event: event)).payload) == before
            listener.wait_for(lambda m: (m.topic, m.payload) == (f"{ROOT}/_node/alarm/storage", b""))
            assert service.end(signal.SIGTERM) == 0
