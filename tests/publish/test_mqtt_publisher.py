"""The publisher on a real broker: what arrives, what is kept, and what happens when the broker goes."""

from __future__ import annotations

import json
import logging
import os
import signal
import subprocess
import sys
import threading
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from pathlib import Path
from typing import Any

import pytest

from rtid.publish import messages
from rtid.publish.mqtt import MqttPublisher
from rtid.report import Drift, Quantity
from rtid.settings import Broker as BrokerSettings
from tests.support.broker import Broker, Listener, Message, free_port, mosquitto, publish
from tests.support.reports import STAMP, make_report, make_transition
from tests.support.wait import wait_until

ROOT = "rtid/packing-2"
STATUS = messages.status("packing-2", stamp=STAMP, loops=["conveyor"])
NODE_PROCESS = """
import sys, threading
from rtid.publish.mqtt import MqttPublisher
from rtid.settings import Broker
publisher = MqttPublisher(Broker(port=int(sys.argv[1])), node="packing-2", client_id="rtid-packing-2")
publisher.start({"state": "online"})
threading.Event().wait()
"""


@contextmanager
def running(port: int, **settings: Any) -> Iterator[MqttPublisher]:
    publisher = MqttPublisher(BrokerSettings(port=port, **settings), node="packing-2", client_id="rtid-packing-2")
    publisher.start(STATUS)
    try:
        yield publisher
    finally:
        publisher.stop()


def on(topic: str) -> Callable[[Message], bool]:
    return lambda message: message.topic == f"{ROOT}/{topic}"


def drifted(ratio: float) -> Any:
    return make_report(drift=Drift(ratio=ratio))


def ratio(message: Message) -> float:
    return float(json.loads(message.payload)["drift_ratio"])


def raise_alarm(publisher: MqttPublisher, **changes: Any) -> None:
    transition = make_transition(**changes)
    payload = messages.event(transition, node="packing-2", loop="conveyor", sequence=1)
    publisher.event(payload, "conveyor", transition)


def kept(port: int) -> dict[str, Message]:
    """What a newcomer finds on the broker: everything that stands before a marker of our own."""
    with Listener(port) as listener:
        publish(port, "marker", "")
        listener.wait_for(lambda message: message.topic == "marker")
        return {m.topic.removeprefix(ROOT + "/"): m for m in listener.messages if m.retain}


def settle(publisher: MqttPublisher, port: int) -> None:
    """Return when the broker has all that the publisher was given: messages of one connection keep their order."""
    with Listener(port) as listener:
        publisher.snapshot({}, "_last")
        listener.wait_for(on("_last/snapshot"))


def test_each_payload_is_retained_under_its_topic_with_its_quality_of_service(mqtt5_broker: Broker) -> None:
    with running(mqtt5_broker.port) as publisher:
        report = make_report()
        publisher.report(report)
        raise_alarm(publisher)
        raise_alarm(publisher, alarm="out_of_range", signal="drive.speed")
        settle(publisher, mqtt5_broker.port)
        found = kept(mqtt5_broker.port)
    assert {topic: message.qos for topic, message in found.items()} == {
        "status": 1,
        "conveyor/model": 0,
        "conveyor/drift": 0,
        "conveyor/health": 0,
        "conveyor/alarm/plant_drift": 1,
        "conveyor/alarm/out_of_range/drive.speed": 1,
    }
    assert json.loads(found["status"].payload) == STATUS
    assert json.loads(found["conveyor/model"].payload) == messages.model(report, "packing-2")
    assert json.loads(found["conveyor/health"].payload) == messages.health(report, "packing-2")


def test_snapshot_is_heard_but_not_retained(mqtt5_broker: Broker) -> None:
    with running(mqtt5_broker.port) as publisher, Listener(mqtt5_broker.port) as listener:
        publisher.snapshot({"reason": "asked"}, "conveyor")
        assert listener.wait_for(on("conveyor/snapshot")).payload == b'{"reason":"asked"}'
        assert "conveyor/snapshot" not in kept(mqtt5_broker.port)


def test_alarm_that_is_over_leaves_no_retained_message(mqtt5_broker: Broker) -> None:
    with running(mqtt5_broker.port) as publisher, Listener(mqtt5_broker.port) as listener:
        settle(publisher, mqtt5_broker.port)
        raise_alarm(publisher)
        raise_alarm(publisher, transition="updated")
        raise_alarm(publisher, transition="acknowledged", retain=False)
        listener.wait_for(lambda m: on("conveyor/alarm/plant_drift")(m) and not m.payload)
        heard = [m.payload for m in listener.on(f"{ROOT}/conveyor/alarm/plant_drift")]
        assert [json.loads(payload)["transition"] for payload in heard[:-1]] == ["active", "updated"]
        assert "conveyor/alarm/plant_drift" not in kept(mqtt5_broker.port)


def test_report_between_two_due_ones_is_published_only_when_health_changed(mqtt5_broker: Broker) -> None:
    with running(mqtt5_broker.port) as publisher, Listener(mqtt5_broker.port) as listener:
        publisher.report(make_report(due=False, health="good"))
        settle(publisher, mqtt5_broker.port)
        publisher.report(make_report(due=False, health="good", reason="the same"))
        publisher.report(make_report(due=False, health="failure"))
        listener.wait_for(lambda m: on("conveyor/health")(m) and json.loads(m.payload)["health"] == "failure")
        assert len(listener.on(f"{ROOT}/conveyor/health")) == 2
        assert not listener.on(f"{ROOT}/conveyor/drift")


@pytest.mark.parametrize("quantities", [{}, {"gain": Quantity(None, None, None, None, "")}])
def test_no_model_before_the_first_fit(mqtt5_broker: Broker, quantities: dict[str, Quantity]) -> None:
    with running(mqtt5_broker.port) as publisher:
        publisher.report(make_report(quantities=quantities))
        settle(publisher, mqtt5_broker.port)
        assert kept(mqtt5_broker.port).keys() == {"status", "conveyor/health", "conveyor/drift"}


def test_broker_away_and_back_gets_the_latest_of_each_topic_once(mqtt5_broker: Broker) -> None:
    port = mqtt5_broker.port
    with running(port) as publisher:
        publisher.report(drifted(0.1))
        settle(publisher, mqtt5_broker.port)
        mqtt5_broker.kill()
        wait_until(lambda: not publisher.connected)
        for number in range(2, 6):
            publisher.report(drifted(float(number)))
        for step in ("active", "updated", "cleared"):
            raise_alarm(publisher, transition=step)
        publisher.snapshot({"reason": "asked"}, "conveyor")
        mqtt5_broker.start()
        with Listener(port) as listener:
            settle(publisher, port)
            publish(port, "marker", "")
            listener.wait_for(lambda message: message.topic == "marker")
            (drift,) = listener.on(f"{ROOT}/conveyor/drift")
            (alarm,) = listener.on(f"{ROOT}/conveyor/alarm/plant_drift")
        assert ratio(drift) == 5.0
        assert json.loads(alarm.payload)["transition"] == "cleared"
        assert publisher.counts.dropped == 2


def test_alarm_that_the_broker_never_acknowledged_does_not_come_back_over_a_newer_one(mqtt5_broker: Broker) -> None:
    with running(mqtt5_broker.port) as publisher:
        settle(publisher, mqtt5_broker.port)
        os.kill(mqtt5_broker.pid, signal.SIGSTOP)
        raise_alarm(publisher, transition="active")
        wait_until(lambda: publisher.counts.held == 1)
        mqtt5_broker.kill()
        wait_until(lambda: not publisher.connected)
        raise_alarm(publisher, transition="cleared")
        mqtt5_broker.start()
        wait_until(lambda: publisher.counts.connections == 2)
        settle(publisher, mqtt5_broker.port)
        stands = kept(mqtt5_broker.port)["conveyor/alarm/plant_drift"]
    assert json.loads(stands.payload)["transition"] == "cleared"


def test_broker_that_forgot_everything_gets_it_again(mqtt5_broker: Broker) -> None:
    with running(mqtt5_broker.port) as publisher:
        publisher.report(make_report())
        raise_alarm(publisher)
        settle(publisher, mqtt5_broker.port)
        before = kept(mqtt5_broker.port)
        mqtt5_broker.restart()
        wait_until(lambda: publisher.counts.connections == 2)
        settle(publisher, mqtt5_broker.port)
        assert kept(mqtt5_broker.port) == before


def test_broker_that_comes_later_gets_what_was_said_before(
    mqtt5_broker: Broker, caplog: pytest.LogCaptureFixture
) -> None:
    mqtt5_broker.stop()
    with running(mqtt5_broker.port) as publisher:
        publisher.report(drifted(3.0))
        wait_until(lambda: "cannot be reached" in caplog.text)
        assert not publisher.connected
        mqtt5_broker.start()
        with Listener(mqtt5_broker.port) as listener:
            assert ratio(listener.wait_for(on("conveyor/drift"))) == 3.0


def test_killed_process_is_offline_by_its_will(mqtt5_broker: Broker) -> None:
    with Listener(mqtt5_broker.port, f"{ROOT}/status") as listener:
        root = Path(__file__).parents[2]
        process = subprocess.Popen([sys.executable, "-c", NODE_PROCESS, str(mqtt5_broker.port)], cwd=root)
        try:
            listener.wait_for(lambda message: message.payload == b'{"state":"online"}')
        finally:
            process.kill()
            process.wait()
        will = listener.wait_for(lambda message: message.payload == b'{"state":"offline"}')
        assert will.qos == 1
    assert kept(mqtt5_broker.port)["status"].payload == b'{"state":"offline"}'


def test_clean_stop_says_goodbye_once_after_the_last_values(mqtt5_broker: Broker) -> None:
    port = mqtt5_broker.port
    with Listener(port) as listener:
        with running(port) as publisher:
            settle(publisher, mqtt5_broker.port)
            publisher.report(drifted(7.0))
        publish(port, "marker", "")
        listener.wait_for(lambda message: message.topic == "marker")
        topics = [message.topic for message in listener.messages]
        assert topics.index(f"{ROOT}/conveyor/drift") < len(topics) - 2
        assert [m.payload for m in listener.on(f"{ROOT}/status")] == [messages.dump(STATUS), b'{"state":"offline"}']
    assert kept(port)["status"].payload == b'{"state":"offline"}'
    assert not publisher.connected


def test_wrong_password_is_said_once_and_stops_nothing(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    if mosquitto() is None:
        pytest.skip("mosquitto is missing; the fallback broker knows no passwords")
    secret = tmp_path / "broker.secret"
    secret.write_text("wrong\n")
    with Broker(users={"rtid": "right"}) as broker:
        login = {"username": "rtid", "password_file": str(secret)}
        with caplog.at_level(logging.WARNING), running(broker.port, **login) as refused:
            wait_until(lambda: "refuses the connection" in caplog.text)
            refused.report(make_report())
            assert not refused.connected
        secret.write_text("right\n")
        with running(broker.port, **login) as accepted:
            wait_until(lambda: accepted.connected)
    assert caplog.text.count("refuses the connection") == 1


def test_message_that_is_forbidden_is_counted_and_said(tmp_path: Path, caplog: pytest.LogCaptureFixture) -> None:
    if mosquitto() is None:
        pytest.skip("mosquitto is missing; the fallback broker knows no access list")
    access = tmp_path / "access"
    access.write_text(f"topic write {ROOT}/status\n")
    access.chmod(0o600)
    with Broker(more=[f"acl_file {access}"]) as broker, running(broker.port) as publisher:
        raise_alarm(publisher)
        wait_until(lambda: publisher.counts.failed == 1)
        wait_until(lambda: "mend its access list" in caplog.text)
        assert publisher.connected


def test_ten_thousand_reports_without_a_broker_leave_a_small_store() -> None:
    with running(free_port()) as publisher:
        for number in range(10_000):
            publisher.report(drifted(float(number)))
        raise_alarm(publisher)
        assert publisher.counts.held == 2 * 4  # three topics and an alarm, each as the latest and as due


def test_frozen_broker_blocks_nobody_and_gets_the_latest(mqtt5_broker: Broker) -> None:
    with running(mqtt5_broker.port) as publisher, Listener(mqtt5_broker.port) as listener:
        settle(publisher, mqtt5_broker.port)
        os.kill(mqtt5_broker.pid, signal.SIGSTOP)
        try:
            for number in range(2000):
                publisher.report(drifted(float(number)))
            held = publisher.counts.held
        finally:
            os.kill(mqtt5_broker.pid, signal.SIGCONT)
        assert held <= 2 * 3
        listener.wait_for(lambda message: on("conveyor/drift")(message) and ratio(message) == 1999.0)


def test_stop_does_not_wait_for_a_frozen_broker(mqtt5_broker: Broker) -> None:
    with running(mqtt5_broker.port) as publisher:
        settle(publisher, mqtt5_broker.port)
        os.kill(mqtt5_broker.pid, signal.SIGSTOP)
        try:
            publisher.report(make_report())
            stopping = threading.Thread(target=publisher.stop, daemon=True)
            stopping.start()
            stopping.join(20.0)
            assert not stopping.is_alive()
        finally:
            os.kill(mqtt5_broker.pid, signal.SIGCONT)


def test_action_has_no_topic() -> None:
    with running(free_port()) as publisher:
        raise_alarm(publisher, alarm=None, action="hold", transition=None)
        assert publisher.counts.held == 0
