"""The intake that fits a source, and the running intakes of a node."""

from __future__ import annotations

import threading
import time
from collections.abc import Sequence

from rtid.intake.mqtt import MqttIntake
from rtid.intake.queue import ReadingQueue
from rtid.intake.serial_port import SerialIntake
from rtid.settings import Broker, Node, Source

GOODBYE_S = 2.0  # longest wait for the sources to close

Intake = SerialIntake | MqttIntake
Told = tuple[Source, Broker | None]  # what an intake was made for


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


class Intakes:
    """What reads the sources of a node into `queue`; none at first."""

    def __init__(self, queue: ReadingQueue) -> None:
        self._queue = queue
        self._running: dict[str, tuple[Told, Intake]] = {}

    @property
    def running(self) -> list[Intake]:
        return [intake for _, intake in self._running.values()]

    def plan(self, node: Node) -> dict[str, tuple[Told, Intake]]:
        """For `follow`: the running intakes whose source is as before, else new ones.

        Raises MissingInput or InputOutputError when a password or certificate file cannot be read.
        """
        planned = {}
        for name, source in node.sources.items():
            told = (source, node.broker if source.mqtt else None)
            running = self._running.get(name)
            if running is None or running[0] != told:
                client_id = f"rtid-{node.name}-{name}"
                running = told, make_intake(source, self._queue, broker=node.broker, client_id=client_id)
            planned[name] = running
        return planned

    def follow(self, planned: dict[str, tuple[Told, Intake]]) -> None:
        """Stop what is not planned, start what does not run."""
        before, self._running = self.running, planned
        _stop([intake for intake in before if intake not in self.running])
        for intake in self.running:
            if intake not in before:
                intake.start()

    def stop(self) -> None:
        self.follow({})


def _stop(intakes: Sequence[Intake]) -> None:
    """All at once, and none for longer than two seconds: a broker that does not answer must not delay the goodbye."""
    endings = [threading.Thread(target=intake.stop, name=f"{intake.name}-end", daemon=True) for intake in intakes]
    for ending in endings:
        ending.start()
    deadline = time.monotonic() + GOODBYE_S
    for ending in endings:
        ending.join(max(0.0, deadline - time.monotonic()))
