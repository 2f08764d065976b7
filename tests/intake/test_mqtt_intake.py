"""The MQTT source on a real broker: subscription, retained messages, wildcards, loss and return, takeover."""

from __future__ import annotations

import logging
from typing import Any

import pytest

from rtid import settings
from rtid.intake.mqtt import MqttIntake
from rtid.intake.queue import ReadingQueue
from rtid.settings import MqttFeed, Source
from tests.support.broker import Broker, publish
from tests.support.running_source import RunningSource
from tests.support.sources import signal, source
from tests.support.wait import wait_until

HALL = source(
    "json",
    signal("hall.valve", path="valve", topic="plant/hall/valve"),
    signal("hall.temp", path="temp", topic="plant/hall/temp"),
    mqtt=MqttFeed("plant/hall/#"),
)


@pytest.fixture(autouse=True)
def _short_back_off(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("rtid.mqtt_client.RECONNECT_S", (1, 1))


class Running(RunningSource):
    """A started source on a broker; `**broker` are further settings of the broker."""

    intake: MqttIntake

    def __init__(self, port: int, of: Source = HALL, *, client_id: str = "rtid-test", **broker: Any) -> None:
        self.port = port
        queue = ReadingQueue()
        super().__init__(MqttIntake(of, settings.Broker(port=port, **broker), queue, client_id=client_id), queue)

    def wait_subscribed(self, unwanted: str = "plant/hall/nothing") -> None:
        """Publish on a topic that no signal wants until a message arrives."""
        before = self.intake.counts.messages

        def heard() -> bool:
            if self.intake.connected:
                publish(self.port, unwanted, "{}")
            return self.intake.counts.messages > before

        wait_until(heard, what="the subscription")


def test_messages_become_readings_of_the_signals_on_their_topics(mqtt5_broker: Broker) -> None:
    with Running(mqtt5_broker.port) as running:
        running.wait_subscribed()
        publish(mqtt5_broker.port, "plant/hall/valve", '{"valve": 40, "temp": 1}', qos=1)
        publish(mqtt5_broker.port, "plant/hall/temp", '{"temp": 21.5}', qos=1)
        publish(mqtt5_broker.port, "plant/other/temp", '{"temp": 3}', qos=1)
        valve, temp = running.wait_for(2)
        assert (valve.values, temp.values) == ({"hall.valve": 40.0}, {"hall.temp": 21.5})
        assert valve.time == valve.arrival < temp.arrival
        assert running.intake.counts.rejected == {}
        assert set(running.intake.skew_s()) == {"plant/hall/valve", "plant/hall/temp"}


def test_retained_messages_are_counted_and_never_samples(mqtt5_broker: Broker) -> None:
    publish(mqtt5_broker.port, "plant/hall/temp", '{"temp": 99}', retain=True, qos=1)
    with Running(mqtt5_broker.port) as running:
        wait_until(lambda: running.intake.counts.retained == 1, what="the retained message")
        publish(mqtt5_broker.port, "plant/hall/temp", '{"temp": 1}', retain=True, qos=1)
        assert [reading.values for reading in running.wait_for(1)] == [{"hall.temp": 1.0}]
        assert running.intake.counts.retained == 1


def test_goes_on_after_a_restart_of_the_broker(mqtt5_broker: Broker, caplog: pytest.LogCaptureFixture) -> None:
    with caplog.at_level(logging.INFO, "rtid.intake"), Running(mqtt5_broker.port) as running:
        running.wait_subscribed()
        mqtt5_broker.stop()
        wait_until(lambda: not running.intake.connected, what="the loss is noticed")
        wait_until(lambda: "cannot be reached" in caplog.text, what="the failure is told")
        mqtt5_broker.start()
        running.wait_subscribed()
        publish(mqtt5_broker.port, "plant/hall/temp", '{"temp": 5}')
        assert running.wait_for(1)[0].values == {"hall.temp": 5.0}
        assert running.intake.counts.reconnects == 1
        assert running.intake.alive
    assert caplog.text.count("connected to the broker") == 2


def test_broker_that_is_not_there_at_the_start_is_waited_for(mqtt5_broker: Broker) -> None:
    mqtt5_broker.stop()
    with Running(mqtt5_broker.port) as running:
        mqtt5_broker.start()
        running.wait_subscribed()
        assert running.intake.counts.reconnects == 0


def test_plain_numbers_under_wildcards(mqtt5_broker: Broker) -> None:
    rooms = source("plain", signal("rooms.east", topic="rooms/east/+"), signal("rooms.west", topic="rooms/west/#"),
                   mqtt=MqttFeed("rooms/#", qos=1))
    with Running(mqtt5_broker.port, rooms) as running:
        running.wait_subscribed("rooms")
        publish(mqtt5_broker.port, "rooms/east/temp", "20.5", qos=1)
        publish(mqtt5_broker.port, "rooms/west", "19", qos=1)
        publish(mqtt5_broker.port, "rooms/west", "warm", qos=1)
        publish(mqtt5_broker.port, "rooms/west", "18", qos=1)
        assert [dict(reading.values) for reading in running.wait_for(3)] == [
            {"rooms.east": 20.5}, {"rooms.west": 19.0}, {"rooms.west": 18.0}]
        assert running.intake.counts.rejected == {"number": 1}
        assert set(running.intake.skew_s()) == {"rooms/east/temp", "rooms/west"}


def test_fault_in_a_callback_does_not_end_the_network_thread(
    mqtt5_broker: Broker, monkeypatch: pytest.MonkeyPatch, caplog: pytest.LogCaptureFixture
) -> None:
    with Running(mqtt5_broker.port) as running:
        running.wait_subscribed()
        with monkeypatch.context() as patch:
            patch.setattr("rtid.intake.skew.Skew.note", lambda *_: 1 // 0)
            publish(mqtt5_broker.port, "plant/hall/temp", '{"temp": 1}')
            wait_until(lambda: "division" in caplog.text or "modulo" in caplog.text, what="the fault is logged")
        publish(mqtt5_broker.port, "plant/hall/temp", '{"temp": 2}')
        assert running.wait_for(1)[0].values == {"hall.temp": 2.0}


def test_takeover_by_a_client_of_the_same_name_is_told(
    mqtt5_broker: Broker, caplog: pytest.LogCaptureFixture
) -> None:
    with Running(mqtt5_broker.port) as first:
        first.wait_subscribed()
        with Running(mqtt5_broker.port):
            wait_until(lambda: "same client id" in caplog.text, what="the takeover")


def test_refused_subscription_is_told(caplog: pytest.LogCaptureFixture) -> None:
    """The test broker refuses none, so the answer is made by hand (MQTT 5.0, section 3.9.3: 0x87 not authorized)."""
    from paho.mqtt.packettypes import PacketTypes
    from paho.mqtt.reasoncodes import ReasonCode

    intake = Running(1).intake
    intake._on_subscribe(None, None, 1, [ReasonCode(PacketTypes.SUBACK, identifier=1)], None)
    assert caplog.text == ""
    intake._on_subscribe(None, None, 1, [ReasonCode(PacketTypes.SUBACK, identifier=0x87)], None)
    assert "refuses the subscription to plant/hall/#: Not authorized" in caplog.text


def test_wrong_password_is_told_once(tmp_path: Any, caplog: pytest.LogCaptureFixture, mqtt5_broker: Broker) -> None:
    secret = tmp_path / "secret"
    secret.write_text("wrong\n")
    with Broker(users={"rtid": "right"}) as closed:
        with Running(closed.port, username="rtid", password_file=str(secret)) as running:
            wait_until(lambda: "refuses the connection" in caplog.text, what="the refusal")
            assert not running.intake.connected
        secret.write_text("right\n")
        with Running(closed.port, username="rtid", password_file=str(secret)) as running:
            wait_until(lambda: running.intake.connected, what="the connection")
