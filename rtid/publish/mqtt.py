"""Publishing over MQTT: the worker leaves its values in an outbox, a thread of our own hands them to the client.

The client's own queue keeps the oldest messages and resends them after a reconnection. So nothing is handed to it while
the broker is away, and after every connection the online status goes first: only when the broker has acknowledged it
are the latest values sent, behind whatever the client resent.
"""

from __future__ import annotations

import contextlib
import logging
import threading
import time
from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import Any

from paho.mqtt.client import Client

from rtid import mqtt_client
from rtid.publish import messages
from rtid.publish.outbox import Outbox, Outgoing
from rtid.report import Health, Report, State, Transition
from rtid.settings import Broker

GOODBYE_S = 2.0

log = logging.getLogger(__name__)


@dataclass(slots=True)
class PublishCounts:
    """What became of the messages. Written by the publisher's threads, read by others."""

    connections: int = 0
    sent: int = 0
    failed: int = 0  # refused by the client or by the broker (access list)
    dropped: int = 0  # alarm messages that a later one replaced before they could be sent
    held: int = 0  # messages in memory now: bounded by the number of topics


class MqttPublisher:
    """Publishes the reports of one node. Only `stop` waits, at most two seconds.

    Raises MissingInput or InputOutputError when a password or certificate file cannot be read.
    """

    def __init__(self, broker: Broker, *, node: str, client_id: str) -> None:
        self._broker = broker
        self._node = node
        self._root = f"{broker.prefix}/{node}"
        self._outbox = Outbox()
        self._counts = PublishCounts()
        self._connected = False
        self._greeting = b""
        self._greeting_id: int | None = None
        self._complaint = ""
        self._last_health: dict[str, tuple[Health, State]] = {}
        self._thread = threading.Thread(target=self._publish_all, name="publish", daemon=True)
        self._client = self._make_client(client_id)

    def start(self, status: Mapping[str, Any]) -> None:
        """Begin to connect, and go on trying; `status` is published at every connection."""
        self._greeting = messages.dump(status)
        self._thread.start()
        mqtt_client.start(self._client, self._broker)

    def report(self, report: Report) -> None:
        """`model` (from the first fit on), `drift` and `health` when due; `health` also when it changed in between."""
        health = (report.health, report.state)
        if not report.due and self._last_health.get(report.loop) == health:
            return
        self._last_health[report.loop] = health
        self._put(f"{report.loop}/health", messages.health(report, self._node))
        if report.due:
            self._put(f"{report.loop}/drift", messages.drift(report, self._node))
        if report.due and any(quantity.value is not None for quantity in report.quantities.values()):
            self._put(f"{report.loop}/model", messages.model(report, self._node))

    def event(self, payload: Mapping[str, Any], loop: str, transition: Transition) -> None:
        """The message of an alarm; empty when it is back to normal and acknowledged. Actions have no topic."""
        if transition.alarm is None:
            return
        content = messages.dump(payload) if transition.retain else b""
        topic = self._alarm_topic(loop, transition.alarm, transition.signal)
        self._outbox.put(Outgoing(topic, content, qos=1, every=True))

    def standing(self, loop: str, told: Mapping[tuple[str, str | None], Mapping[str, Any] | None]) -> None:
        """What is to be kept of these alarms (name and signal); None: nothing."""
        for (alarm, signal), payload in told.items():
            content = b"" if payload is None else messages.dump(payload)
            self._outbox.put(Outgoing(self._alarm_topic(loop, alarm, signal), content, qos=1))

    def forget(self, loop: str) -> None:
        """The loop is watched no longer: nothing is kept of its numbers."""
        self._last_health.pop(loop, None)
        for name in ("model", "drift", "health"):
            self._outbox.put(Outgoing(f"{self._root}/{loop}/{name}", b"", qos=1))

    def greet(self, status: Mapping[str, Any]) -> None:
        """Another `status`, now and at every connection to come."""
        self._greeting = messages.dump(status)
        self._outbox.put(Outgoing(self._status_topic, self._greeting, qos=1))

    def snapshot(self, payload: Mapping[str, Any], loop: str) -> None:
        topic = f"{self._root}/{loop}/snapshot"
        self._outbox.put(Outgoing(topic, messages.dump(payload), qos=1, retain=False))

    def stop(self) -> None:
        """Send what waits, say goodbye and disconnect; give up after two seconds."""
        deadline = time.monotonic() + GOODBYE_S
        self._outbox.finish()
        if self._thread.is_alive():
            self._thread.join(GOODBYE_S / 2)
        if self._connected:
            self._say_goodbye(deadline)
        self._client.disable_logger()  # it logs the end that we ask for as an error
        self._client.disconnect()
        ending = threading.Thread(target=self._client.loop_stop, name="publish-end", daemon=True)
        ending.start()
        ending.join(max(0.0, deadline - time.monotonic()))
        self._connected = False

    @property
    def connected(self) -> bool:
        return self._connected

    @property
    def counts(self) -> PublishCounts:
        """The counts of now."""
        return replace(self._counts, dropped=self._outbox.dropped, held=len(self._outbox))

    def _make_client(self, client_id: str) -> Client:
        client = mqtt_client.make_client(self._broker, client_id)
        client.will_set(self._status_topic, messages.OFFLINE, qos=1, retain=True)
        client.on_connect = self._on_connect
        client.on_connect_fail = self._on_connect_fail
        client.on_disconnect = self._on_disconnect
        client.on_publish = self._on_publish
        return client

    @property
    def _status_topic(self) -> str:
        return f"{self._root}/status"

    def _alarm_topic(self, loop: str, alarm: str, signal: str | None) -> str:
        return f"{self._root}/{loop}/alarm/{alarm}" + ("" if signal is None else f"/{signal}")

    def _put(self, topic: str, payload: Mapping[str, Any]) -> None:
        self._outbox.put(Outgoing(f"{self._root}/{topic}", messages.dump(payload)))

    def _publish_all(self) -> None:
        while (message := self._outbox.take()) is not None:
            try:
                accepted = self._publish(message)
            except ValueError as error:
                log.error("%s: cannot be published: %s", message.topic, error)
                accepted = False
            if not accepted:
                self._counts.failed += 1
                self._outbox.sent()

    def _publish(self, message: Outgoing) -> bool:
        info = self._client.publish(message.topic, message.payload, qos=message.qos, retain=message.retain)
        return info.rc == 0

    def _say_goodbye(self, deadline: float) -> None:
        info = self._client.publish(self._status_topic, messages.OFFLINE, qos=1, retain=True)
        with contextlib.suppress(ValueError, RuntimeError):  # the connection went away: the will speaks
            info.wait_for_publish(max(0.0, deadline - time.monotonic()))

    def _on_connect(self, client: Client, *details: Any) -> None:
        _data, _flags, reason, _properties = details
        if reason.is_failure:
            self._complain(mqtt_client.why_refused(self._broker, reason))
            return
        self._complaint = ""
        self._counts.connections += 1
        self._connected = True
        self._greeting_id = client.publish(self._status_topic, self._greeting, qos=1, retain=True).mid
        log.info("connected to the broker at %s", self._broker.address)

    def _on_connect_fail(self, *_: Any) -> None:
        self._complain(mqtt_client.why_unreachable(self._broker))

    def _on_disconnect(self, *details: Any) -> None:
        _client, _data, _flags, reason, _properties = details
        if self._connected and reason.is_failure:
            self._complain(mqtt_client.why_disconnected(self._broker, reason))
        self._connected = False
        self._outbox.shut()

    def _on_publish(self, *details: Any) -> None:
        _client, _data, message_id, reason, _properties = details
        if reason.is_failure:
            self._counts.failed += 1
            self._complain(f"the broker at {self._broker.address} refuses a message ({reason}); mend its access list")
        else:
            self._counts.sent += 1
        if message_id == self._greeting_id:
            self._greeting_id = None
            self._outbox.open()
        else:
            self._outbox.sent()

    def _complain(self, text: str) -> None:
        """Once, not at every attempt."""
        if text != self._complaint:
            self._complaint = text
            log.warning("%s", text)
