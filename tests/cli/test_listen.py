"""`rtid listen` shows what comes, and at the end what was lost."""

from __future__ import annotations

import json
import signal
from pathlib import Path

from tests.support.broker import Broker, publish
from tests.support.plant_lines import configure, plant_rows
from tests.support.process import RunningRtid, rtid
from tests.support.pty import PtyDevice
from tests.support.wait import wait_until

MQTT = """\
node: hall
broker: {{host: 127.0.0.1, port: {port}}}
sources:
  hall:
    mqtt: {{topic: "plant/#"}}
    decode: json
    signals:
      valve: {{topic: plant/ahu, path: valve, unit: "%"}}
      temp: {{topic: plant/ahu, path: temp, unit: degC}}
loops:
  ahu: {{inputs: [hall.valve], output: hall.temp, period_s: 1}}
"""


def test_readings_are_shown_as_they_come_and_losses_at_the_end(tmp_path: Path) -> None:
    with PtyDevice(tmp_path / "board") as board:
        path = configure(tmp_path, board.port)
        with RunningRtid("listen", path) as listening:
            listening.wait_for_line("restarts some boards")
            listening.wait_for_line("is open")
            board.stream([b"half a line", *plant_rows(50), b"1,2,3*00"])
            wait_until(lambda: sum(line.startswith("drive  ") for line in listening.stdout) == 50, what="fifty lines")
            listening.wait_for_line("rejected (checksum)")
            assert listening.end(signal.SIGINT) == 0
    assert listening.stdout[0].startswith("drive  0.000 s  volts ")
    assert " rad/s" in listening.stdout[0]
    end = "".join(listening.stdout[50:])
    assert "drive: 50 readings from 51 messages" in end
    assert "1 rejected, checksum: " in end
    assert not (tmp_path / "state").exists()


def test_json_is_one_document_at_the_end(tmp_path: Path, mqtt5_broker: Broker) -> None:
    path = tmp_path / "node.yaml"
    path.write_text(MQTT.format(port=mqtt5_broker.port))
    publish(mqtt5_broker.port, "plant/ahu", '{"valve": 1, "temp": 2}', retain=True)
    with RunningRtid("listen", path, "hall", "--json") as listening:
        listening.wait_for_line("connected")
        for value in range(3):
            publish(mqtt5_broker.port, "plant/ahu", f'{{"valve": {value}, "temp": 20.5}}')
        publish(mqtt5_broker.port, "plant/ahu", "not json")
        listening.wait_for_line("rejected")
        assert listening.end(signal.SIGINT) == 0
    found = json.loads("".join(listening.stdout))["sources"]["hall"]
    assert (found["readings"], found["retained"], found["dropped"]) == (3, 1, 0)
    assert found["rate_per_s"] > 0.0
    assert [problem["count"] for problem in found["rejected"].values()] == [1]


def test_no_reading_at_all_is_69_with_a_hint(tmp_path: Path) -> None:
    with PtyDevice(tmp_path / "board") as board:
        ended = rtid("listen", configure(tmp_path, board.port), "--seconds", "0.5")
    assert ended.returncode == 69
    assert "no reading from drive; check the cable" in ended.stderr


def test_an_unknown_source_gets_the_nearest_name(tmp_path: Path) -> None:
    ended = rtid("listen", configure(tmp_path), "drove")
    assert ended.returncode == 64
    assert ended.stderr == "rtid: no source 'drove'; expected one of drive (nearest valid name 'drive')\n"


def test_a_duration_is_a_number_above_zero(tmp_path: Path) -> None:
    ended = rtid("listen", configure(tmp_path), "--seconds", "-3")
    assert ended.returncode == 64
    assert ended.stderr.count("\n") == 1
