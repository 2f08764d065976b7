"""The intake that fits a source."""

from __future__ import annotations

from rtid.intake.mqtt import MqttIntake
from rtid.intake.queue import ReadingQueue
from rtid.intake.serial_port import SerialIntake
from rtid.settings import Broker, Source

Intake = SerialIntake | MqttIntake


def make_intake(source: Source, queue: ReadingQueue, *, broker: Broker | None, client_id: str) -> Intake:
    """Not started yet. `client_id` names this client to the broker: two clients with one name throw each other out."""
    if source.serial is not None:
        return SerialIntake(source, queue)
    assert broker is not None, "the configuration refuses a source on MQTT without a broker"
    return MqttIntake(source, broker, queue, client_id=client_id)


def origin(source: Source) -> str:
    """Where the source's payloads come from, in plain words."""
    if source.serial is not None:
        return f"serial port {source.serial.port}, {source.serial.baud} baud"
    return f"MQTT topic {source.mqtt.topic if source.mqtt else ''}"
