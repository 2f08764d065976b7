"""The test broker itself: what the other tests lean on."""

from __future__ import annotations

import paho.mqtt.publish as paho_publish
import pytest
from paho.mqtt import MQTTException

from tests.support import broker as support
from tests.support.broker import Broker, Listener, publish


def test_retained_message_is_there_for_a_late_listener(broker: Broker) -> None:
    publish(broker.port, "a/b", b"1", retain=True, qos=1)
    with Listener(broker.port) as listener:
        kept = listener.wait_for(lambda message: message.topic == "a/b")
        publish(broker.port, "a/c", "2")
        live = listener.wait_for(lambda message: message.topic == "a/c")
    assert (kept.payload, kept.retain, kept.qos) == (b"1", True, 1)
    assert (live.payload, live.retain, live.qos) == (b"2", False, 0)


def test_broker_comes_back_on_the_same_port(broker: Broker) -> None:
    port = broker.port
    broker.kill()
    with pytest.raises(ConnectionRefusedError):
        publish(port, "a", "1")
    broker.start()
    broker.restart()
    publish(port, "a", "1", qos=1)
    assert broker.port == port


def single(port: int, password: str) -> None:
    auth = {"username": "rtid", "password": password}
    paho_publish.single("a", "1", qos=1, hostname="127.0.0.1", port=port, auth=auth)  # type: ignore[arg-type]


def test_wrong_password_is_refused() -> None:
    if support.mosquitto() is None:
        pytest.skip("mosquitto is missing; the fallback broker knows no passwords")
    with Broker(users={"rtid": "right"}) as broker:
        single(broker.port, "right")
        with pytest.raises(MQTTException, match="[Nn]ot authori"):
            single(broker.port, "wrong")


def test_fallback_broker_serves_the_older_protocol(monkeypatch: pytest.MonkeyPatch) -> None:
    pytest.importorskip("amqtt")
    monkeypatch.setattr(support, "mosquitto", lambda: None)
    with Broker() as broker, Listener(broker.port) as listener:
        publish(broker.port, "a/b", b"1", qos=1)
        assert listener.wait_for(lambda message: message.topic == "a/b").payload == b"1"
