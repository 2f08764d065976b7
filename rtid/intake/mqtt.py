"""Readings from an MQTT broker. All callbacks run in the network thread of the client."""

from __future__ import annotations

import logging
import threading
import time
from collections.abc import Callable
from typing import Any

from paho.mqtt.client import Client, MQTTMessage

from rtid import mqtt_client
from rtid.intake.live_source import LiveSource
from rtid.intake.queue import ReadingQueue
from rtid.intake.skew import Skew
from rtid.settings import Broker, Source
from rtid.topics import has_wildcard


class MqttIntake(LiveSource):
    """The live feed of one MQTT source. `monotonic` gives the arrival times, in seconds.

    Connects, comes back and subscribes again by itself, also when the broker is not there at the start. Messages that
    the broker had kept are counted and never samples: nobody knows when they were measured.
    Raises MissingInput or InputOutputError when a file named under `broker` cannot be read.
    """

    def __init__(
        self,
        source: Source,
        broker: Broker,
        queue: ReadingQueue,
        *,
        client_id: str,
        monotonic: Callable[[], float] = time.monotonic,
    ) -> None:
        if source.mqtt is None:
            raise ValueError(f"{source.name} has no MQTT topic")
        super().__init__(source, queue)
        self._feed = source.mqtt
        self._broker = broker
        self._skew = Skew(_one_topic(source.signals[0].place.topic))
        self._monotonic = monotonic
        self._thread: threading.Thread | None = None
        self._client = mqtt_client.make_client(broker, client_id)
        self._client.on_connect = self._on_connect
        self._client.on_connect_fail = self._on_connect_fail
        self._client.on_disconnect = self._on_disconnect
        self._client.on_subscribe = self._on_subscribe
        self._client.on_message = self._on_message

    @property
    def alive(self) -> bool:
        """False when the network thread has ended; for the watchdog. A client may say connected and be deaf."""
        return self._thread is None or self._thread.is_alive()

    def skew_s(self) -> dict[str, float]:
        """How much later than the source's first topic each topic arrives: median of the last 50, in seconds."""
        return self._skew.medians()

    def start(self) -> None:
        mqtt_client.start(self._client, self._broker)

    def stop(self) -> None:
        """Say goodbye to the broker and wait for the network thread."""
        self._client.disconnect()
        self._client.loop_stop()
        self.counts.connected = False

    def _on_connect(self, client: Client, *details: Any) -> None:
        _userdata, _flags, reason, _properties = details
        self._thread = threading.current_thread()
        if reason.is_failure:
            self._say(logging.ERROR, mqtt_client.why_refused(self._broker, reason))
            return
        self._note_connected(f"connected to the broker at {self._broker.address}")
        client.subscribe(self._feed.topic, self._feed.qos)

    def _on_connect_fail(self, *_: Any) -> None:
        self._thread = threading.current_thread()
        self._say(logging.WARNING, mqtt_client.why_unreachable(self._broker))

    def _on_subscribe(self, *details: Any) -> None:
        _client, _userdata, _message_id, reasons, _properties = details
        for reason in reasons:
            if reason.is_failure:
                self._say(logging.ERROR, f"the broker refuses the subscription to {self._feed.topic}: {reason}")

    def _on_disconnect(self, *details: Any) -> None:
        _client, _userdata, _flags, reason, _properties = details
        self.counts.connected = False
        level = logging.WARNING if reason.is_failure else logging.INFO
        self._say(level, mqtt_client.why_disconnected(self._broker, reason))

    def _on_message(self, client: Client, userdata: Any, message: MQTTMessage) -> None:
        arrival = self._monotonic()
        if message.retain:
            self.counts.messages += 1
            self.counts.retained += 1
            return
        if self._delivery.wanted(message.topic):
            self._skew.note(message.topic, arrival)
        self._delivery.take(bytes(message.payload), arrival=arrival, topic=message.topic)


def _one_topic(filter_: str | None) -> str | None:
    """None for a filter that stands for several topics."""
    return None if filter_ is None or has_wildcard(filter_) else filter_
