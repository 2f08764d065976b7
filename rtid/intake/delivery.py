"""The last step of every live source: decode, count, put on the queue. Whatever the bytes, its thread lives on."""

from __future__ import annotations

import logging

from rtid.intake.decode import Decoder
from rtid.intake.queue import ReadingQueue
from rtid.intake.reading import Counts, Reading, Rejected
from rtid.settings import Signal, Source

log = logging.getLogger("rtid.intake")


class Delivery:
    """Used by one source's thread alone; `counts` may be read by others."""

    def __init__(self, source: Source, queue: ReadingQueue) -> None:
        self.counts = Counts()
        self._name = source.name
        self._decoder = Decoder(source)
        self._queue = queue
        queue.register(source.name, self.counts)

    def wanted(self, topic: str) -> tuple[Signal, ...]:
        """The signals that a message on `topic` carries."""
        return self._decoder.wanted(topic)

    def take(self, payload: bytes, *, arrival: float, topic: str | None = None) -> None:
        self.counts.messages += 1
        self.counts.last_arrival = arrival
        for problem in self._deliver(payload, arrival, topic):
            self.reject(problem)

    def reject(self, problem: Rejected) -> None:
        """Count it; the first of its kind is logged."""
        if problem.kind not in self.counts.rejected:
            log.warning("%s: rejected (%s): %s", self._name, problem.kind, problem.text)
        self.counts.reject(problem)

    def _deliver(self, payload: bytes, arrival: float, topic: str | None) -> list[Rejected]:
        try:
            readings, problems = self._decoder.decode(payload, arrival=arrival, topic=topic)
        except Exception as error:  # a fault of ours must not stop the source
            return [Rejected("internal", f"{type(error).__name__}: {error}")]
        self._put(readings)
        return problems

    def _put(self, readings: list[Reading]) -> None:
        self.counts.readings += len(readings)
        for reading in readings:
            self._queue.put(reading)
